// Numbers as the server writes them: real minus, thousands separated, a narrow
// no-break space before the unit, an en dash for "no value".

export const NO_VALUE = '–';
const THIN = '\u202f';

export function number(v, decimals = 0) {
  if (!Number.isFinite(v)) return NO_VALUE;
  const [whole, part] = Math.abs(v).toFixed(decimals).split('.');
  let s = whole.replace(/\B(?=(\d{3})+$)/g, ',');
  if (part) s += '.' + part;
  return v < 0 && /[1-9]/.test(s) ? '−' + s : s;
}

export function signed(v, decimals = 0) {
  const s = number(v, decimals);
  return v > 0 && /[1-9]/.test(s) ? '+' + s : s;
}

export function withUnit(text, unit) {
  return unit && text !== NO_VALUE ? text + THIN + unit : text;
}

export function percent(part, whole) {
  if (!whole) return NO_VALUE;
  const p = (100 * part) / whole;
  if (p > 0 && p < 0.05) return 'under 0.1' + THIN + '%';
  if (p < 100 && p >= 99.95) return 'over 99.9' + THIN + '%';
  return number(p, p === 0 || p === 100 || (p >= 9.95 && p < 99) ? 0 : 1) + THIN + '%';
}
