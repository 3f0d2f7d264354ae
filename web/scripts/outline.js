// The lines over and under the dies: wafer, flat or notch, edge exclusion, bar.
import { barLength } from './view.js';
import { number } from './number.js';

function edgePath(ctx, view, size, radius) {
  const { layout } = view;
  const s = view.pxPerMM(size);
  const [cx, cy] = view.toPx(0, 0, size);
  const angle = (-layout.mark_angle * Math.PI) / 180; // canvas angles turn clockwise
  ctx.beginPath();
  if (layout.flat_offset > 0 && layout.flat_offset < radius) {
    const half = Math.acos(layout.flat_offset / radius);
    ctx.arc(cx, cy, radius * s, angle + half, angle - half + 2 * Math.PI);
    ctx.closePath();
  } else if (layout.mark === 'notch' && radius === layout.diameter / 2) {
    const depth = 3;
    const half = depth / radius;
    ctx.arc(cx, cy, radius * s, angle + half, angle - half + 2 * Math.PI);
    ctx.lineTo(cx + Math.cos(angle) * (radius - depth) * s, cy + Math.sin(angle) * (radius - depth) * s);
    ctx.closePath();
  } else {
    ctx.arc(cx, cy, radius * s, 0, 2 * Math.PI);
  }
}

export function drawWafer(ctx, view, size, palette) {
  ctx.fillStyle = `#${palette.paper}`;
  ctx.fillRect(0, 0, size, size);
  edgePath(ctx, view, size, view.layout.diameter / 2);
  ctx.fillStyle = `#${palette.wafer}`;
  ctx.fill();
}

export function drawLines(ctx, view, size, palette, ratio) {
  ctx.strokeStyle = `#${palette.ink}`;
  ctx.lineWidth = 1.5 * ratio;
  ctx.setLineDash([]);
  edgePath(ctx, view, size, view.layout.diameter / 2);
  ctx.stroke();
  if (view.layout.edge > 0) {
    ctx.lineWidth = ratio;
    ctx.setLineDash([6 * ratio, 5 * ratio]);
    edgePath(ctx, view, size, view.layout.diameter / 2 - view.layout.edge);
    ctx.stroke();
    ctx.setLineDash([]);
  }
  drawBar(ctx, view, size, palette, ratio);
}

function drawBar(ctx, view, size, palette, ratio) {
  const length = barLength(view.pxPerMM(size), size);
  const px = length * view.pxPerMM(size);
  const left = 12 * ratio;
  const y = size - 14 * ratio;
  const text = `${number(length, length < 1 ? 2 : 0)}\u202f${view.layout.length_unit}`;
  ctx.font = `${15 * ratio}px system-ui, sans-serif`;
  ctx.fillStyle = `#${palette.paper}`;
  ctx.globalAlpha = 0.85;
  ctx.fillRect(left - 6 * ratio, y - 26 * ratio, Math.max(px, ctx.measureText(text).width) + 12 * ratio, 34 * ratio);
  ctx.globalAlpha = 1;
  ctx.strokeStyle = ctx.fillStyle = `#${palette.ink}`;
  ctx.lineWidth = 2 * ratio;
  ctx.beginPath();
  ctx.moveTo(left, y - 5 * ratio);
  ctx.lineTo(left, y);
  ctx.lineTo(left + px, y);
  ctx.lineTo(left + px, y - 5 * ratio);
  ctx.stroke();
  ctx.fillText(text, left, y - 9 * ratio);
}

// drawCursor marks the die the read-out tells of.
export function drawCursor(ctx, view, size, die, palette, ratio) {
  ctx.clearRect(0, 0, size, size);
  if (!die) return;
  const s = view.pxPerMM(size);
  const [x, y] = view.toPx(...view.position(die[0], die[1]), size);
  const w = Math.max(view.layout.pitch_x * s, 6 * ratio);
  const h = Math.max(view.layout.pitch_y * s, 6 * ratio);
  for (const [colour, wide] of [[palette.paper, 5], [palette.ink, 2.5]]) {
    ctx.strokeStyle = `#${colour}`;
    ctx.lineWidth = wide * ratio;
    ctx.strokeRect(x - w / 2, y - h / 2, w, h);
  }
  // Hairs to the picture's edges, so that a small die is found.
  ctx.strokeStyle = `#${palette.ink}`;
  ctx.lineWidth = ratio;
  ctx.globalAlpha = 0.5;
  ctx.beginPath();
  ctx.moveTo(x, 0);
  ctx.lineTo(x, y - h / 2);
  ctx.moveTo(x, y + h / 2);
  ctx.lineTo(x, size);
  ctx.moveTo(0, y);
  ctx.lineTo(x - w / 2, y);
  ctx.moveTo(x + w / 2, y);
  ctx.lineTo(size, y);
  ctx.stroke();
  ctx.globalAlpha = 1;
}
