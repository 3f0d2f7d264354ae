// Decoding of binary planes and grids.
//
// A plane is "EPLN", version, encoding, two zero bytes, n (u32 at 8), four zero
// bytes, base (f64 at 16), resolution (f64 at 24), then the values split by
// significance: all lowest bytes, then all next bytes. A grid is "EGRD",
// version, three zero bytes, runs (u32 at 8), dies (u32 at 12), then 8 bytes a
// run: x i16, y i16, n i32. Everything is little-endian.

const WIDTH = { 1: 2, 2: 4, 3: 4, 4: 8 };
const VIEW = { 1: Int16Array, 2: Int32Array, 3: Float32Array, 4: Float64Array };
const MISSING = { 1: -32768, 2: -2147483648 };

function header(buffer, magic, length) {
  if (buffer.byteLength < length) throw new Error(`${magic}: ${buffer.byteLength} bytes are too few`);
  const view = new DataView(buffer);
  const found = String.fromCharCode(view.getUint8(0), view.getUint8(1), view.getUint8(2), view.getUint8(3));
  if (found !== magic || view.getUint8(4) !== 1) throw new Error(`not an ${magic} of version 1`);
  return view;
}

// decodePlane gives { n, raw, value(i), isMissing(i), scale, offset }: raw holds
// the stored numbers, and value = (offset + raw) scaled by a power of ten, which
// is one rounding, so that decimals come out as they stood in the file.
export function decodePlane(buffer) {
  const view = header(buffer, 'EPLN', 32);
  const encoding = view.getUint8(5);
  const width = WIDTH[encoding];
  if (!width) throw new Error(`plane of unknown encoding ${encoding}`);
  const n = view.getUint32(8, true);
  if (buffer.byteLength !== 32 + n * width) throw new Error(`plane of ${n} dies has ${buffer.byteLength} bytes, want ${32 + n * width}`);
  const raw = new VIEW[encoding](join(new Uint8Array(buffer, 32), n, width).buffer);
  if (encoding > 2) {
    return { n, raw, isFloat: true, isMissing: (i) => Number.isNaN(raw[i]), value: (i) => raw[i] };
  }
  const missing = MISSING[encoding];
  const resolution = view.getFloat64(24, true);
  const exponent = Math.round(Math.log10(resolution));
  const offset = Math.round(view.getFloat64(16, true) / resolution);
  const power = 10 ** Math.abs(exponent);
  const scaled = exponent < 0 ? (k) => k / power : (k) => k * power;
  return {
    n, raw, missing, resolution, offset,
    isMissing: (i) => raw[i] === missing,
    value: (i) => (raw[i] === missing ? NaN : scaled(offset + raw[i])),
  };
}

// join undoes the split by significance.
function join(split, n, width) {
  const out = new Uint8Array(n * width);
  for (let b = 0; b < width; b++) {
    const from = b * n;
    for (let i = 0, o = b; i < n; i++, o += width) out[o] = split[from + i];
  }
  return out;
}

// decodeGrid gives { n, x, y, rows, xMin, xMax, find(x, y) }; rows maps a die y
// to [first, after last] index, for dies in canonical order.
export function decodeGrid(buffer) {
  const view = header(buffer, 'EGRD', 16);
  const runs = view.getUint32(8, true);
  const n = view.getUint32(12, true);
  if (buffer.byteLength !== 16 + 8 * runs) throw new Error(`grid of ${runs} runs has ${buffer.byteLength} bytes`);
  const x = new Int16Array(n);
  const y = new Int16Array(n);
  const rows = new Map();
  let i = 0;
  let xMin = Infinity;
  let xMax = -Infinity;
  for (let r = 0, p = 16; r < runs; r++, p += 8) {
    const x0 = view.getInt16(p, true);
    const row = view.getInt16(p + 2, true);
    const count = view.getInt32(p + 4, true);
    if (count < 1 || i + count > n) throw new Error(`grid run ${r} of ${count} dies does not fit ${n}`);
    const known = rows.get(row);
    if (known) known[1] = i + count;
    else rows.set(row, [i, i + count]);
    for (let k = 0; k < count; k++, i++) {
      x[i] = x0 + k;
      y[i] = row;
    }
    xMin = Math.min(xMin, x0);
    xMax = Math.max(xMax, x0 + count - 1);
  }
  if (i !== n) throw new Error(`grid runs hold ${i} dies, want ${n}`);
  const find = (dx, dy) => {
    const span = rows.get(dy);
    if (!span) return -1;
    let [lo, hi] = span;
    while (lo < hi) {
      const m = (lo + hi) >> 1;
      if (x[m] < dx) lo = m + 1;
      else hi = m;
    }
    return lo < span[1] && x[lo] === dx ? lo : -1;
  };
  return { n, x, y, rows, xMin: n ? xMin : 0, xMax: n ? xMax : 0, find };
}
