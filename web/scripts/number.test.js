import assert from 'node:assert/strict';
import test from 'node:test';
import { number, percent, signed, withUnit } from './number.js';
import { View, barLength } from './view.js';

test('numbers are set as the server sets them', () => {
  assert.equal(number(14516), '14,516');
  assert.equal(number(-0.84, 1), '−0.8');
  assert.equal(number(-0.04, 1), '0.0');
  assert.equal(number(NaN, 2), '–');
  assert.equal(number(1234567.891, 2), '1,234,567.89');
  assert.equal(signed(0.84, 1), '+0.8');
  assert.equal(withUnit('455.0', 'nm'), '455.0\u202fnm');
  assert.equal(withUnit('–', 'nm'), '–');
});

test('shares never round to none or all', () => {
  assert.equal(percent(1, 10000), 'under 0.1\u202f%');
  assert.equal(percent(9999, 10000), 'over 99.9\u202f%');
  assert.equal(percent(71, 100), '71\u202f%');
  assert.equal(percent(0, 0), '–');
});

test('the view keeps a place under the pointer when zooming, and finds dies both ways', () => {
  const view = new View({ diameter: 100, pitch_x: 0.5, pitch_y: 0.5, centre_x: 10, centre_y: -3, flip_x: true, flip_y: true });
  const before = view.toMM(500, 200, 700);
  view.zoomBy(3, 500, 200, 700);
  const after = view.toMM(500, 200, 700);
  assert.ok(Math.abs(before[0] - after[0]) < 1e-9 && Math.abs(before[1] - after[1]) < 1e-9);
  const [x, y] = view.position(4, 9);
  assert.deepEqual([x, y], [3, -6]);
  assert.deepEqual(view.die(x, y), [4, 9]);
  view.zoomBy(1 / 9, 0, 0, 700);
  assert.deepEqual([view.zoom, Math.abs(view.cx), Math.abs(view.cy)], [1, 0, 0]);
});

test('the bar is a round length', () => {
  assert.equal(barLength(700 / 106, 700), 20);
  assert.equal(barLength(7000 / 106, 700), 2);
});
