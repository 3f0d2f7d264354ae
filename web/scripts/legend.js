// The legend of a value map: how many dies each shade is, along the scale.
import { number, percent, withUnit } from './number.js';

const HEIGHT = 104; // CSS pixels

export function drawLegend(map, palette, scale) {
  const canvas = document.getElementById('legend');
  const note = document.getElementById('legend-note');
  if (!canvas) return;
  canvas.hidden = !map.shaded;
  if (!map.shaded) {
    if (note) note.textContent = '';
    return;
  }
  const ratio = map.ratio;
  const width = map.printing ? canvas.width : Math.round(canvas.clientWidth * ratio);
  canvas.width = width;
  canvas.height = HEIGHT * ratio;
  const ctx = canvas.getContext('2d');
  ctx.scale(ratio, ratio);
  const wide = width / ratio;
  bars(ctx, map.shaded.counts, cellsFor(map.quantity), wide, palette);
  shades(ctx, scale, wide, palette);
  marks(ctx, map.quantity, wide, palette);
  if (note) note.textContent = words(map.shaded, map.quantity, map);
}

// cellsFor avoids a comb where values are coarse: four of their steps a cell.
function cellsFor(q) {
  const steps = (q.high - q.low) * 10 ** q.decimals;
  return Math.min(Math.max(Math.floor(steps / 4), 8), 64);
}

// bars is the histogram along the scale.
function bars(ctx, counts, cells, wide, palette) {
  const sums = new Array(cells).fill(0);
  counts.forEach((n, i) => {
    sums[Math.floor((i * cells) / counts.length)] += n;
  });
  const top = Math.max(...sums, 1);
  ctx.fillStyle = `#${palette.ink}`;
  ctx.globalAlpha = 0.55;
  for (let i = 0; i < cells; i++) {
    const h = (sums[i] / top) * 38;
    ctx.fillRect((i * wide) / cells + 0.5, 40 - h, wide / cells - 1, h);
  }
  ctx.globalAlpha = 1;
}

function shades(ctx, scale, wide, palette) {
  const n = scale.length / 6;
  for (let i = 0; i < n; i++) {
    ctx.fillStyle = `#${scale.slice(6 * i, 6 * i + 6)}`;
    ctx.fillRect((i * wide) / n, 42, wide / n + 1, 22);
  }
  ctx.strokeStyle = `#${palette.ink}`;
  ctx.strokeRect(0.5, 42.5, wide - 1, 21);
}

function marks(ctx, q, wide, palette) {
  const steps = ticks(q, wide);
  ctx.font = '15px system-ui, sans-serif';
  ctx.fillStyle = ctx.strokeStyle = `#${palette.ink}`;
  for (const t of steps) {
    const v = q.low + (q.high - q.low) * t;
    const x = Math.min(Math.max(t * wide, 0.5), wide - 0.5);
    ctx.beginPath();
    ctx.moveTo(x, 64);
    ctx.lineTo(x, 70);
    ctx.stroke();
    ctx.textAlign = t === 0 ? 'left' : t === 1 ? 'right' : 'center';
    ctx.fillText(withUnit(number(v, decimalsFor(q)), t === 0 || t === 1 || t === 0.5 ? q.unit : ''), x, 84);
    if (q.scale === 'deviation' && t % 0.5 === 0) ctx.fillText(['short', 'target', 'long'][t * 2], x, 100);
  }
}

// decimalsFor are those that tell a hundredth of the scale apart, and no more
// than were measured.
export function decimalsFor(q) {
  const span = q.high - q.low;
  return span > 0 ? Math.min(q.decimals, Math.max(0, Math.ceil(-Math.log10(span / 100)))) : q.decimals;
}

// ticks are where the scale is labelled, from 0 to 1: codes of a category only
// at whole numbers.
export function ticks(q, wide) {
  if (q.scale !== 'category') return wide > 420 ? [0, 0.25, 0.5, 0.75, 1] : [0, 0.5, 1];
  const span = q.high - q.low;
  if (!(span >= 1)) return [0.5];
  const step = Math.max(1, Math.ceil(span / 8));
  const out = [];
  for (let v = 0; v <= span; v += step) out.push(v / span);
  return out;
}

function words(shaded, q, map) {
  const n = shaded.codes.length - shaded.missing;
  if (n === 0) return `No die has a value of ${q.label}; all ${number(shaded.codes.length)} are hatched.`;
  let s = `${number(n)} dies with a value`;
  if (shaded.missing) s += `, ${number(shaded.missing)} without (hatched)`;
  const beyond = shaded.below + shaded.above;
  s += beyond
    ? `. The scale covers the 1st to 99th percentile${q.scale === 'deviation' ? ', evenly about the target' : ''}: ${percent(beyond, n)} lie beyond and take the end shades.`
    : '. No die lies beyond the scale.';
  const perDie = map.view.pxPerMM(map.canvas.width) * Math.min(map.data.layout.pitch_x, map.data.layout.pitch_y);
  if (perDie < 1) s += ' Dies are smaller than a screen point: each point shows the die at its middle. Zoom in for all.';
  return s;
}
