import assert from 'node:assert/strict';
import test from 'node:test';
import { decodeGrid, decodePlane } from './plane.js';

function plane(encoding, n, base, resolution, bytes) {
  const buffer = new ArrayBuffer(32 + bytes.length);
  const view = new DataView(buffer);
  [...'EPLN'].forEach((c, i) => view.setUint8(i, c.charCodeAt(0)));
  view.setUint8(4, 1);
  view.setUint8(5, encoding);
  view.setUint32(8, n, true);
  view.setFloat64(16, base, true);
  view.setFloat64(24, resolution, true);
  new Uint8Array(buffer, 32).set(bytes);
  return buffer;
}

// split writes values low bytes first, then the next, as planes are stored.
function split(typed) {
  const width = typed.BYTES_PER_ELEMENT;
  const from = new Uint8Array(typed.buffer);
  const out = new Uint8Array(from.length);
  for (let i = 0; i < typed.length; i++) for (let b = 0; b < width; b++) out[b * typed.length + i] = from[i * width + b];
  return out;
}

test('int16 values come back as the decimals that were written', () => {
  // 452.37 = 455.00 + (−263)·0.01
  const p = decodePlane(plane(1, 3, 455, 0.01, split(Int16Array.of(-263, -32768, 0))));
  assert.equal(p.value(0), 452.37);
  assert.ok(Number.isNaN(p.value(1)));
  assert.ok(p.isMissing(1));
  assert.equal(p.value(2), 455);
});

test('int32 and whole-number resolutions', () => {
  const p = decodePlane(plane(2, 2, 1000, 10, split(Int32Array.of(70000, -2147483648))));
  assert.equal(p.value(0), 701000);
  assert.ok(Number.isNaN(p.value(1)));
});

test('float planes are the values themselves', () => {
  const p32 = decodePlane(plane(3, 2, 0, 0, split(Float32Array.of(1.5, NaN))));
  assert.equal(p32.value(0), 1.5);
  assert.ok(p32.isMissing(1));
  const p64 = decodePlane(plane(4, 1, 0, 0, split(Float64Array.of(0.1))));
  assert.equal(p64.value(0), 0.1);
});

test('bin codes use base 0 and resolution 1', () => {
  const p = decodePlane(plane(1, 2, 0, 1, split(Int16Array.of(0, 41))));
  assert.deepEqual([p.value(0), p.value(1)], [0, 41]);
});

test('damaged planes are refused', () => {
  assert.throws(() => decodePlane(new ArrayBuffer(5)), /too few/);
  assert.throws(() => decodePlane(plane(1, 3, 0, 1, new Uint8Array(2))), /want 38/);
  assert.throws(() => decodePlane(plane(9, 0, 0, 1, new Uint8Array(0))), /encoding 9/);
  const other = plane(1, 0, 0, 1, new Uint8Array(0));
  new Uint8Array(other)[0] = 65;
  assert.throws(() => decodePlane(other), /not an EPLN/);
});

function grid(runs, n) {
  const buffer = new ArrayBuffer(16 + 8 * runs.length);
  const view = new DataView(buffer);
  [...'EGRD'].forEach((c, i) => view.setUint8(i, c.charCodeAt(0)));
  view.setUint8(4, 1);
  view.setUint32(8, runs.length, true);
  view.setUint32(12, n, true);
  runs.forEach(([x, y, count], i) => {
    view.setInt16(16 + 8 * i, x, true);
    view.setInt16(18 + 8 * i, y, true);
    view.setInt32(20 + 8 * i, count, true);
  });
  return buffer;
}

test('a grid finds its dies over gaps', () => {
  const g = decodeGrid(grid([[-2, -1, 2], [1, -1, 1], [-3, 4, 3]], 6));
  assert.deepEqual([...g.x], [-2, -1, 1, -3, -2, -1]);
  assert.deepEqual([...g.y], [-1, -1, -1, 4, 4, 4]);
  assert.equal(g.find(1, -1), 2);
  assert.equal(g.find(0, -1), -1);
  assert.equal(g.find(-3, 4), 3);
  assert.equal(g.find(0, 0), -1);
  assert.deepEqual([g.xMin, g.xMax], [-3, 1]);
});

test('grids that do not add up are refused', () => {
  assert.throws(() => decodeGrid(grid([[0, 0, 5]], 4)), /does not fit/);
  assert.throws(() => decodeGrid(grid([[0, 0, 3]], 4)), /hold 3/);
});
