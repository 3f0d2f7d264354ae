// rewrite changes numbers where they stand in a document. moves say where (line
// and column from 1, in characters) and what value stands there; by is how far x
// and y move, places the decimals that are kept at least.
export function rewrite(text, moves, by, places) {
  const lines = text.split('\n');
  const seen = new Set();
  const ordered = [...moves].sort((a, b) => b.line - a.line || b.column - a.column); // from the end: places before stay true
  for (const m of ordered) {
    const at = `${m.line}:${m.column}`;
    if (seen.has(at)) continue;
    seen.add(at);
    const chars = [...(lines[m.line - 1] ?? '')];
    const written = chars.slice(m.column - 1, m.column - 1 + m.length).join('');
    if (written === '' || Number.isNaN(Number(written))) continue;
    const decimals = Math.max(places[m.axis === 'x' ? 0 : 1], written.split('.')[1]?.length ?? 0);
    const value = Number(written) + (m.axis === 'x' ? by.x : by.y);
    chars.splice(m.column - 1, m.length, value.toFixed(Math.min(decimals, 12)));
    lines[m.line - 1] = chars.join('');
  }
  return lines.join('\n');
}
