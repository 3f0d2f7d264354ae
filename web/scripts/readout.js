// The words beside the map: one die with every quantity, its bin and why.
import { number, signed, withUnit } from './number.js';

function row(list, name, value, note) {
  const dt = document.createElement('dt');
  dt.textContent = name;
  const dd = document.createElement('dd');
  dd.textContent = value;
  if (note) {
    const small = document.createElement('small');
    small.textContent = note;
    dd.append(' ', small);
  }
  list.append(dt, dd);
}

export function writeReadout(map, spoken) {
  const box = document.getElementById('readout');
  if (!box || !map.die) return;
  box.setAttribute('aria-live', spoken ? 'polite' : 'off');
  const [x, y] = map.die;
  const [mmX, mmY] = map.view.position(x, y);
  const radius = Math.hypot(mmX, mmY);
  const list = document.createElement('dl');
  row(list, 'Die', `x ${number(x)}, y ${number(y)}`);
  row(list, 'Place', withUnit(`${signed(mmX, 2)}, ${signed(mmY, 2)}`, map.data.layout.length_unit), `${number(radius, 1)}\u202f${map.data.layout.length_unit} from the centre`);
  const i = map.grid.find(x, y);
  if (i < 0) {
    const inside = radius <= map.data.layout.diameter / 2;
    row(list, 'Measured', inside ? 'no: this die is not in the measurement' : 'outside the wafer');
  } else {
    quantities(map, list, i);
    bin(map, list, i);
  }
  box.replaceChildren(list);
}

function quantities(map, list, i) {
  map.data.quantities.forEach((q, k) => {
    const plane = map.planes?.[k];
    if (!plane) {
      row(list, q.label, '…');
      return;
    }
    const v = plane.value(i);
    const off = q.target === null ? '' : `${signed(v - q.target, q.decimals)} from target`;
    row(list, q.label, Number.isNaN(v) ? 'no value' : withUnit(number(v, q.decimals), q.unit), Number.isNaN(v) ? '' : off);
  });
}

function bin(map, list, i) {
  const { bins } = map.data;
  if (!bins || !map.binPlane) return;
  const cell = bins.cells[map.binPlane.raw[i]];
  if (!cell) return;
  const under = `${bins.spec} v${bins.version}`;
  switch (cell.class) {
    case 'sellable': row(list, 'Bin', cell.name, `sellable under ${under}`); break;
    case 'unsellable': row(list, 'Bin', cell.name, `not sold under ${under}`); break;
    case 'untested': row(list, 'Bin', 'untested', `a value that ${under} needs is missing`); break;
    default: row(list, 'Rejected', cell.name, `under ${under}`);
  }
}
