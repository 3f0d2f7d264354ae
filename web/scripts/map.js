// The wafer map: fetches grid and planes, draws them, follows pointer and keys.
import { isDark } from './ground.js';
import { decodeGrid, decodePlane } from './plane.js';
import { GAP_FROM, axis, binCodes, binInks, paint, scaleInks, shade } from './raster.js';
import { View } from './view.js';
import { drawCursor, drawLines, drawWafer } from './outline.js';
import { drawLegend } from './legend.js';
import { readMapData } from './swatch.js';
import { writeReadout } from './readout.js';
import { listen } from './gestures.js';

const STEPS = 256;

export function startMap() {
  const data = readMapData();
  const canvas = document.getElementById('map-canvas');
  if (!data || !canvas) return null;
  const map = new WaferMap(canvas, document.getElementById('map-cursor'));
  map.show();
  return map;
}

class WaferMap {
  constructor(canvas, overlay) {
    this.canvas = canvas;
    this.overlay = overlay;
    this.hidden = document.createElement('canvas'); // the dies alone
    this.buffers = new Map(); // decoded planes and grids by URL
    this.die = null;
    this.queued = false;
    listen(this);
    new ResizeObserver(() => this.redraw()).observe(canvas);
    document.addEventListener('ground', () => this.redraw());
    // On paper the canvas keeps its pixels and is only scaled: it is drawn on the
    // light ground once, before the page is laid out for print.
    for (const [name, printing] of [['beforeprint', true], ['afterprint', false]]) {
      window.addEventListener(name, () => {
        this.printing = printing;
        this.redrawNow();
      });
    }
  }

  palette() {
    return isDark() && !this.printing ? this.data.palette.dark : this.data.palette.light;
  }

  // fetched gives what a URL holds, decoded; kept for as long as the page lives.
  fetched(url, decode) {
    if (!this.buffers.has(url)) {
      const wait = (async () => {
        const answer = await fetch(url);
        if (!answer.ok) throw new Error(`the server answered ${answer.status}`);
        return answer.arrayBuffer();
      })();
      // Decoding counts as drawing, fetching does not.
      this.buffers.set(url, wait.then((bytes) => {
        const start = performance.now();
        const out = decode(bytes);
        out.decodeMS = performance.now() - start;
        return out;
      }));
      wait.catch(() => this.buffers.delete(url));
    }
    return this.buffers.get(url);
  }

  // show reads the page's data block anew and draws what it asks for.
  async show() {
    const data = readMapData();
    if (!data) return;
    this.data = data;
    this.view ??= new View(data.layout);
    this.view.layout = data.layout;
    const quantity = data.quantities.find((q) => q.name === data.shown) ?? data.quantities[0];
    const bins = data.view === 'bins' && data.bins;
    try {
      const [grid, plane] = await Promise.all([
        this.fetched(data.grid, decodeGrid),
        this.fetched(bins ? data.bins.url : quantity.plane, decodePlane),
      ]);
      if (this.data !== data) return; // overtaken by a later choice
      const start = performance.now();
      this.grid = grid;
      this.quantity = quantity;
      this.bins = bins;
      this.codes = bins ? binCodes(plane, data.bins.cells) : null;
      this.shaded = bins ? null : shade(plane, quantity.low, quantity.high, STEPS);
      this.redrawNow();
      this.measured(start, plane.decodeMS + grid.decodeMS);
      plane.decodeMS = grid.decodeMS = 0;
    } catch (err) {
      this.fail(err);
      return;
    }
    this.tell();
    await this.prefetch();
    this.tell();
  }

  measured(start, decodeMS) {
    const spent = performance.now() - start + decodeMS;
    performance.measure('map drawn', { start: performance.now() - spent, duration: spent });
    this.canvas.dataset.drawnMs = spent.toFixed(1);
    this.canvas.dataset.drawn = this.bins ? `bins ${this.data.bins.spec} ${this.data.bins.version}` : `quantity ${this.quantity.name}`;
  }

  fail(err) {
    const box = document.getElementById('readout');
    box.textContent = `The map could not be drawn: ${err.message}. Load the page again.`;
    this.canvas.dataset.failed = err.message;
  }

  // prefetch reads the other planes, which the read-out tells of.
  async prefetch() {
    const { data } = this;
    const wanted = data.quantities.map((q) => q.plane);
    if (data.bins) wanted.push(data.bins.url);
    const planes = [];
    for (const url of wanted) planes.push(await this.fetched(url, decodePlane).catch(() => null));
    if (this.data !== data) return;
    this.planes = planes.slice(0, data.quantities.length);
    this.binPlane = data.bins ? planes[planes.length - 1] : null;
    this.canvas.dataset.ready = 'true';
  }

  // size sets both canvases to whole device pixels and gives their side.
  size() {
    if (this.printing && this.canvas.width >= 64) return this.canvas.width;
    this.ratio = Math.min(window.devicePixelRatio || 1, 2);
    const side = Math.max(Math.round(this.canvas.clientWidth * this.ratio), 64);
    for (const c of [this.canvas, this.overlay, this.hidden]) {
      if (c.width !== side || c.height !== side) c.width = c.height = side;
    }
    return side;
  }

  redraw() {
    if (this.queued || this.printing) return;
    this.queued = true;
    requestAnimationFrame(() => {
      this.queued = false;
      this.redrawNow();
    });
  }

  redrawNow() {
    if (!this.grid) return;
    const side = this.size();
    const palette = this.palette();
    const { layout } = this.data;
    const s = this.view.pxPerMM(side);
    const gap = Math.min(layout.pitch_x, layout.pitch_y) * s >= GAP_FROM;
    const columns = axis(side, side / 2 - this.view.cx * s, s, layout.pitch_x, layout.centre_x, layout.flip_x, gap);
    const rows = axis(side, side / 2 + this.view.cy * s, s, layout.pitch_y, layout.centre_y, !layout.flip_y, gap);
    const ctx = this.hidden.getContext('2d');
    if (this.image?.width !== side) this.image = ctx.createImageData(side, side);
    const scale = this.quantity?.scale === 'deviation' ? palette.deviation : palette.magnitude;
    const inks = this.bins ? binInks(this.bins.cells, palette) : scaleInks(scale, palette);
    paint(new Uint32Array(this.image.data.buffer), side, side, this.grid, this.codes ?? this.shaded.codes, columns, rows, inks);
    ctx.putImageData(this.image, 0, 0);
    const front = this.canvas.getContext('2d');
    drawWafer(front, this.view, side, palette);
    front.drawImage(this.hidden, 0, 0);
    drawLines(front, this.view, side, palette, this.ratio);
    drawCursor(this.overlay.getContext('2d'), this.view, side, this.die, palette, this.ratio);
    drawLegend(this, palette, scale);
    this.canvas.style.touchAction = this.view.zoom > 1 ? 'none' : 'pan-y';
  }

  // point moves the read-out to the die at (x, y), spoken when by key.
  point(die, spoken) {
    this.die = die;
    const side = this.canvas.width;
    drawCursor(this.overlay.getContext('2d'), this.view, side, die, this.palette(), this.ratio);
    this.tell(spoken);
  }

  tell(spoken = false) {
    writeReadout(this, spoken);
  }
}
