// Pointer, wheel, keys and buttons of the map.

const KEYS = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] };

export function listen(map) {
  const { canvas } = map;
  const pointers = new Map();
  let moved = 0;

  const place = (event) => {
    const box = canvas.getBoundingClientRect();
    const scale = canvas.width / box.width;
    return [(event.clientX - box.left) * scale, (event.clientY - box.top) * scale];
  };
  const pointAt = (event) => {
    if (!map.grid) return;
    map.point(map.view.die(...map.view.toMM(...place(event), canvas.width)), false);
  };

  canvas.addEventListener('pointerdown', (event) => {
    pointers.set(event.pointerId, place(event));
    canvas.setPointerCapture(event.pointerId);
    moved = 0;
    pointAt(event);
  });
  canvas.addEventListener('pointermove', (event) => {
    const before = pointers.get(event.pointerId);
    if (!before) {
      if (event.pointerType !== 'touch') pointAt(event);
      return;
    }
    const now = place(event);
    if (pointers.size === 2) pinch(map, pointers, event.pointerId, now);
    else {
      moved += Math.abs(now[0] - before[0]) + Math.abs(now[1] - before[1]);
      if (map.view.zoom > 1 && moved > 4) map.view.panBy(now[0] - before[0], now[1] - before[1], canvas.width);
      else pointAt(event);
    }
    pointers.set(event.pointerId, now);
    map.redraw();
  });
  for (const name of ['pointerup', 'pointercancel']) {
    canvas.addEventListener(name, (event) => pointers.delete(event.pointerId));
  }

  canvas.addEventListener('wheel', (event) => {
    // Turning away from the whole wafer scrolls the page on.
    if (!map.grid || (event.deltaY > 0 && map.view.zoom === 1)) return;
    event.preventDefault();
    map.view.zoomBy(Math.exp(-event.deltaY / 400), ...place(event), canvas.width);
    map.redraw();
  }, { passive: false });

  canvas.addEventListener('keydown', (event) => onKey(map, event));
  for (const button of document.querySelectorAll('[data-zoom]')) {
    button.addEventListener('click', () => zoom(map, button.dataset.zoom));
  }
}

function pinch(map, pointers, id, now) {
  const [other] = [...pointers].filter(([key]) => key !== id).map(([, at]) => at);
  const before = pointers.get(id);
  const spread = (a) => Math.hypot(a[0] - other[0], a[1] - other[1]) || 1;
  map.view.zoomBy(spread(now) / spread(before), (now[0] + other[0]) / 2, (now[1] + other[1]) / 2, map.canvas.width);
}

function zoom(map, how) {
  if (!map.grid) return;
  const side = map.canvas.width;
  if (how === 'whole') map.view.reset();
  else {
    const at = map.die ? map.view.toPx(...map.view.position(...map.die), side) : [side / 2, side / 2];
    map.view.zoomBy(how === 'in' ? 1.6 : 1 / 1.6, ...at, side);
  }
  map.redraw();
}

function onKey(map, event) {
  if (!map.grid || event.ctrlKey || event.metaKey || event.altKey) return;
  const step = KEYS[event.key];
  if (event.key === '+' || event.key === '=') zoom(map, 'in');
  else if (event.key === '-') zoom(map, 'out');
  else if (event.key === '0') zoom(map, 'whole');
  else if (step && event.shiftKey) {
    map.view.panBy(-step[0] * map.canvas.width / 8, step[1] * map.canvas.width / 8, map.canvas.width);
    map.redraw();
  } else if (step) walk(map, step);
  else return;
  event.preventDefault();
}

// walk moves the die cursor to the next die that way, over gaps in the grid.
function walk(map, [right, up]) {
  const { layout } = map.data;
  const dx = layout.flip_x ? -right : right;
  const dy = layout.flip_y ? -up : up;
  let [x, y] = map.die ?? map.view.die(map.view.cx - right * layout.pitch_x, map.view.cy - up * layout.pitch_y);
  const reach = Math.ceil((2 * layout.diameter) / Math.min(layout.pitch_x, layout.pitch_y));
  for (let i = 0; i < reach; i++) {
    x += dx;
    y += dy;
    if (map.grid.find(x, y) >= 0) break;
    if (i === reach - 1) return;
  }
  const side = map.canvas.width;
  const [px, py] = map.view.toPx(...map.view.position(x, y), side);
  if (px < 0 || py < 0 || px > side || py > side) {
    map.view.panBy(side / 2 - px, side / 2 - py, side);
    map.redraw();
  }
  map.point([x, y], true);
}
