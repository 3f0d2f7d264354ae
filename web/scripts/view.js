// Where the wafer lies on the canvas: zoom 1 shows the whole wafer, and (cx, cy)
// is the place in mm at the canvas's middle, x to the right and y up.

const MARGIN = 1.06; // as the server's pictures have it
const MOST_ZOOM = 200;

export class View {
  constructor(layout) {
    this.layout = layout;
    this.reset();
  }

  reset() {
    this.zoom = 1;
    this.cx = 0;
    this.cy = 0;
  }

  pxPerMM(size) {
    return (size / (this.layout.diameter * MARGIN)) * this.zoom;
  }

  // toMM turns a place in a square of size pixels into mm.
  toMM(px, py, size) {
    const s = this.pxPerMM(size);
    return [this.cx + (px - size / 2) / s, this.cy - (py - size / 2) / s];
  }

  toPx(x, y, size) {
    const s = this.pxPerMM(size);
    return [(x - this.cx) * s + size / 2, (this.cy - y) * s + size / 2];
  }

  // zoomBy keeps the place under (px, py) where it is.
  zoomBy(factor, px, py, size) {
    const [x, y] = this.toMM(px, py, size);
    this.zoom = Math.min(Math.max(this.zoom * factor, 1), MOST_ZOOM);
    const s = this.pxPerMM(size);
    this.cx = x - (px - size / 2) / s;
    this.cy = y + (py - size / 2) / s;
    this.rein();
  }

  panBy(dx, dy, size) {
    const s = this.pxPerMM(size);
    this.cx -= dx / s;
    this.cy += dy / s;
    this.rein();
  }

  // rein keeps some of the wafer in sight.
  rein() {
    const reach = (this.layout.diameter / 2) * (1 - 1 / this.zoom) * 1.05;
    this.cx = Math.min(Math.max(this.cx, -reach), reach);
    this.cy = Math.min(Math.max(this.cy, -reach), reach);
  }

  // die gives the die coordinates at a place in mm.
  die(x, y) {
    const l = this.layout;
    return [
      Math.round((l.flip_x ? -x : x) / l.pitch_x + l.centre_x),
      Math.round((l.flip_y ? -y : y) / l.pitch_y + l.centre_y),
    ];
  }

  // position is the centre of a die in mm.
  position(dx, dy) {
    const l = this.layout;
    const x = (dx - l.centre_x) * l.pitch_x;
    const y = (dy - l.centre_y) * l.pitch_y;
    return [l.flip_x ? -x : x, l.flip_y ? -y : y];
  }
}

// barLength is a round length in mm of about a fifth of the picture.
export function barLength(pxPerMM, size) {
  const about = size / 5 / pxPerMM;
  const power = 10 ** Math.floor(Math.log10(about));
  for (const m of [5, 2, 1]) if (m * power <= about) return m * power;
  return power;
}
