import assert from 'node:assert/strict';
import test from 'node:test';
import { rewrite } from './rewrite.js';

const text = 'title: µ\n- {name: A, polygon: [[0.30, 0.3000], [0.34, 0.30]]}\n';

test('numbers are changed where they stand, others stay', () => {
  const moves = [
    { line: 2, column: 24, length: 4, axis: 'x', value: 0.3 },
    { line: 2, column: 30, length: 6, axis: 'y', value: 0.3 },
  ];
  assert.equal(rewrite(text, moves, { x: 0.01234, y: -0.001 }, [4, 4]), 'title: µ\n- {name: A, polygon: [[0.3123, 0.2990], [0.34, 0.30]]}\n');
});

test('a place named twice moves once, and one that is no number stays', () => {
  const moves = [
    { line: 2, column: 24, length: 4, axis: 'x', value: 0.3 },
    { line: 2, column: 24, length: 4, axis: 'x', value: 0.3 },
    { line: 1, column: 1, length: 5, axis: 'x', value: 0 },
    { line: 9, column: 1, length: 5, axis: 'x', value: 0 },
  ];
  assert.equal(rewrite(text, moves, { x: 1, y: 0 }, [2, 2]), 'title: µ\n- {name: A, polygon: [[1.30, 0.3000], [0.34, 0.30]]}\n');
});
