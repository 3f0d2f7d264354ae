// The samples of bins beside their names, drawn with the map's own inks.
import { isDark } from './ground.js';
import { PATTERNS, abgr, struck } from './raster.js';

export function readMapData() {
  const block = document.getElementById('map-data');
  return block ? JSON.parse(block.textContent) : null;
}

// look reads "bin:3:rise", "reject:0:" or "missing".
export function drawLook(canvas, look, palette) {
  const [kind, fill, pattern] = look.split(':');
  const { width, height } = canvas;
  const ctx = canvas.getContext('2d');
  const image = ctx.createImageData(width, height);
  const pixels = new Uint32Array(image.data.buffer);
  const paper = abgr(palette.paper);
  const hatch = abgr(palette.hatch);
  const colour = kind === 'missing' ? 0 : abgr((kind === 'reject' ? palette.reject : palette.bins)[Number(fill)]);
  const p = PATTERNS.indexOf(pattern ?? '');
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let ink = colour;
      if (kind === 'missing') ink = (x + y) % 5 === 0 ? hatch : paper;
      else if (struck(p, x, y)) ink = paper;
      pixels[y * width + x] = ink;
    }
  }
  ctx.putImageData(image, 0, 0);
}

export function drawSwatches(printing = false) {
  const data = readMapData();
  if (!data) return;
  const palette = isDark() && !printing ? data.palette.dark : data.palette.light;
  for (const canvas of document.querySelectorAll('canvas[data-look]')) drawLook(canvas, canvas.dataset.look, palette);
}
