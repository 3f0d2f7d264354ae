import assert from 'node:assert/strict';
import test from 'node:test';
import { MISSING, abgr, axis, binCodes, binInks, paint, ramp, shade, struck } from './raster.js';

const grid = { xMin: 0, xMax: 2, x: Int16Array.of(0, 1, 2), rows: new Map([[0, [0, 3]]]) };

test('pixels are packed for little-endian image data', () => {
  assert.equal(abgr('0f6e78'), 0xff786e0f);
  assert.deepEqual([...ramp('0000ff00ff00')], [0xffff0000, 0xff00ff00]);
});

test('shades cover the range, count the clipped and keep missing apart', () => {
  const plane = { n: 5, raw: Int16Array.of(-100, 0, 99, 200, -32768), missing: -32768, resolution: 0.01, offset: 45500 };
  const s = shade(plane, 455, 456, 10); // k from 0 to 100
  assert.deepEqual([...s.codes], [0, 0, 9, 9, MISSING]);
  assert.deepEqual([s.below, s.above, s.missing], [1, 1, 1]);
  assert.deepEqual([...s.counts], [2, 0, 0, 0, 0, 0, 0, 0, 0, 2]);
});

test('a value at the top of the range is not beyond it', () => {
  const s = shade({ n: 2, raw: Float32Array.of(1, NaN), isFloat: true }, 0, 1, 4);
  assert.deepEqual([...s.codes], [3, MISSING]);
  assert.equal(s.above, 0);
});

test('an axis turns with the layout and leaves gaps between large dies', () => {
  // 3 dies of 1 mm over 30 pixels: 10 pixels a die, half a pixel off each side.
  const right = axis(30, 15, 10, 1, 0, false, true);
  assert.equal(right[1], -1);
  assert.equal(right[15], 0);
  assert.equal(right[28], 1);
  const left = axis(30, 15, 10, 1, 0, true, true);
  assert.equal(left[1], 1);
  assert.ok([...right].some((d) => d < -1000), 'no line between dies');
  const small = axis(30, 15, 2, 1, 0, false, false);
  assert.ok([...small].every((d) => d > -1000), 'dies must touch where no line is asked for');
});

test('painting looks colours up and leaves the rest clear', () => {
  const inks = { colour: Uint32Array.of(11, 22), pattern: null, paper: 7, hatch: 8 };
  const pixels = new Uint32Array(8).fill(99);
  paint(pixels, 4, 2, grid, Uint16Array.of(0, 1, MISSING), Int32Array.of(0, 1, 2, 3), Int32Array.of(0, 5), inks);
  assert.deepEqual([...pixels], [11, 22, 7, 0, 0, 0, 0, 0]);
});

test('bins take their fills and patterns; untested dies are hatched', () => {
  const palette = { bins: ['000001', '000002'], reject: ['000003'], paper: 'ffffff', hatch: '888888' };
  const cells = [
    { look: { fill: 1, reject: false, pattern: 'rise', missing: false } },
    { look: { fill: 0, reject: true, pattern: '', missing: false } },
    { look: { fill: 0, reject: false, pattern: '', missing: true } },
  ];
  const inks = binInks(cells, palette);
  assert.deepEqual([...inks.colour.slice(0, 2)], [abgr('000002'), abgr('000003')]);
  assert.deepEqual([...inks.pattern], [1, 0, 0]);
  assert.deepEqual([...binCodes({ n: 4, raw: Int16Array.of(0, 1, 2, 9) }, cells)], [0, 1, MISSING, MISSING]);
});

test('every pattern strikes out some pixels and not others', () => {
  for (const p of [1, 2, 3, 4]) {
    let n = 0;
    for (let y = 0; y < 60; y++) for (let x = 0; x < 60; x++) n += struck(p, x, y) ? 1 : 0;
    assert.ok(n > 500 && n < 2200, `pattern ${p} strikes ${n} of 3600`);
  }
  assert.equal(struck(0, 3, 3), false);
});
