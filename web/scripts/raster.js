// Painting dies into pixels through a lookup palette: one pass over the pixels,
// no drawing call per die. Nothing here touches the document.

export const MISSING = 0xffff; // code of a die without a value
export const GAP_FROM = 8; // die size in pixels, along its shorter side, from which a line is left between dies
const BETWEEN = -0x80000000;
export const PATTERNS = ['', 'rise', 'fall', 'level', 'dots'];

// abgr packs rrggbb as the little-endian pixel of an ImageData.
export function abgr(hex) {
  const v = parseInt(hex, 16);
  return (0xff000000 | ((v & 0xff) << 16) | (v & 0xff00) | (v >> 16)) >>> 0;
}

// ramp splits a scale of rrggbb into pixels.
export function ramp(scale) {
  const out = new Uint32Array(scale.length / 6);
  for (let i = 0; i < out.length; i++) out[i] = abgr(scale.slice(6 * i, 6 * i + 6));
  return out;
}

// shade gives each die's step of a scale of the given number of steps, MISSING
// where it has no value, with counts per step and the dies beyond either end.
export function shade(plane, low, high, steps) {
  const codes = new Uint16Array(plane.n);
  const counts = new Uint32Array(steps);
  const out = { codes, counts, below: 0, above: 0, missing: 0 };
  const { raw } = plane;
  // Scaled planes are shaded on their integers: value = (offset + k)·resolution.
  const unit = plane.isFloat ? 1 : plane.resolution;
  const from = plane.isFloat ? low : low / unit - plane.offset;
  const to = plane.isFloat ? high : high / unit - plane.offset;
  const factor = steps / (to - from);
  for (let i = 0; i < raw.length; i++) {
    const k = raw[i];
    if (k === plane.missing || k !== k) {
      codes[i] = MISSING;
      out.missing++;
      continue;
    }
    let step = Math.floor((k - from) * factor);
    if (step < 0) {
      step = 0;
      out.below++;
    } else if (step >= steps) {
      if (k > to) out.above++;
      step = steps - 1;
    }
    codes[i] = step;
    counts[step]++;
  }
  return out;
}

// axis gives the die coordinate under each of n pixels: pixel p lies at
// (p + 0.5 − middle)/pxPerMM mm. gap leaves a line between dies.
export function axis(n, middle, pxPerMM, pitch, centre, flip, gap) {
  const out = new Int32Array(n);
  const size = pitch * pxPerMM;
  // One pixel in a die's width is the line, taken off its far side.
  const end = gap ? 0.5 - 1 / size - 1e-9 : 1;
  for (let p = 0; p < n; p++) {
    const mm = (p + 0.5 - middle) / pxPerMM;
    const at = (flip ? -mm : mm) / pitch + centre;
    const die = Math.round(at);
    out[p] = at - die >= end ? BETWEEN : die;
  }
  return out;
}

// struck says whether a pattern strikes out the pixel at (x, y).
export function struck(pattern, x, y) {
  switch (pattern) {
    case 1: return (x + y) % 6 < 2;
    case 2: return (x - y + 600000) % 6 < 2;
    case 3: return y % 5 < 2;
    case 4: return x % 4 < 2 && y % 4 < 2;
    default: return false;
  }
}

// paint fills pixels (width × height, transparent where there is no die).
// columns and rows come from axis; inks are { colour, pattern } by code, with
// paper and hatch for patterns and dies without a value.
export function paint(pixels, width, height, grid, codes, columns, rows, inks) {
  const line = new Int32Array(Math.max(grid.xMax - grid.xMin + 1, 1));
  let drawn = BETWEEN;
  for (let py = 0; py < height; py++) {
    const y = rows[py];
    const span = y === BETWEEN ? undefined : grid.rows.get(y);
    const at = py * width;
    if (!span) {
      pixels.fill(0, at, at + width);
      continue;
    }
    if (y !== drawn) {
      line.fill(-1);
      for (let i = span[0]; i < span[1]; i++) line[grid.x[i] - grid.xMin] = codes[i];
      drawn = y;
    }
    for (let px = 0; px < width; px++) {
      const k = columns[px] - grid.xMin;
      const code = k >= 0 && k < line.length ? line[k] : -1;
      if (code < 0) pixels[at + px] = 0;
      else if (code === MISSING) pixels[at + px] = (px + py) % 5 === 0 ? inks.hatch : inks.paper;
      else if (inks.pattern !== null && inks.pattern[code] && struck(inks.pattern[code], px, py)) pixels[at + px] = inks.paper;
      else pixels[at + px] = inks.colour[code];
    }
  }
}

// binInks makes the inks of bins, and codes where untested dies are MISSING.
export function binInks(cells, palette) {
  const colour = new Uint32Array(cells.length);
  const pattern = new Uint8Array(cells.length);
  const missing = cells.map((c) => c.look.missing);
  cells.forEach((c, i) => {
    colour[i] = abgr((c.look.reject ? palette.reject : palette.bins)[c.look.fill]);
    pattern[i] = PATTERNS.indexOf(c.look.pattern);
  });
  return { colour, pattern, missing, paper: abgr(palette.paper), hatch: abgr(palette.hatch) };
}

export function binCodes(plane, cells) {
  const codes = new Uint16Array(plane.n);
  for (let i = 0; i < plane.n; i++) {
    const k = plane.raw[i];
    codes[i] = k < 0 || k >= cells.length || cells[k].look.missing ? MISSING : k;
  }
  return codes;
}

export function scaleInks(scale, palette) {
  return { colour: ramp(scale), pattern: null, paper: abgr(palette.paper), hatch: abgr(palette.hatch) };
}
