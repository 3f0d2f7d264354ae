import assert from 'node:assert/strict';
import { test } from 'node:test';
import { decimalsFor, ticks } from './legend.js';

test('codes are labelled at whole numbers, each once', () => {
  const q = { scale: 'category', low: 1, high: 4 };
  assert.deepEqual(ticks(q, 500).map((t) => q.low + t * 3), [1, 2, 3, 4]);
  assert.ok(ticks({ scale: 'category', low: 0, high: 300 }, 500).every((t) => Number.isInteger(t * 300)));
  assert.deepEqual(ticks({ scale: 'category', low: 7, high: 7 }, 500), [0.5]);
});

test('a measured scale is labelled in quarters, or in halves where it is narrow', () => {
  assert.equal(ticks({ scale: 'magnitude', low: 0, high: 1 }, 500).length, 5);
  assert.equal(ticks({ scale: 'deviation', low: 0, high: 1 }, 300).length, 3);
});

test('labels have the decimals that the scale needs', () => {
  assert.equal(decimalsFor({ low: 449.2, high: 460.8, decimals: 2 }), 1);
  assert.equal(decimalsFor({ low: 1015.2, high: 1355.7, decimals: 1 }), 0);
  assert.equal(decimalsFor({ low: 3.05, high: 3.19, decimals: 3 }), 3);
  assert.equal(decimalsFor({ low: 5, high: 5, decimals: 2 }), 2);
});
