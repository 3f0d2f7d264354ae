// Charts: options come from the server, with colour tokens that are filled in
// here for the ground, light or dark.
import * as echarts from 'echarts/core';
import { BarChart, LineChart, ScatterChart } from 'echarts/charts';
import { GridComponent, MarkAreaComponent, MarkLineComponent, TooltipComponent } from 'echarts/components';
import { CanvasRenderer } from 'echarts/renderers';
import { drawLook, readMapData } from './swatch.js';
import { isDark } from './ground.js';
import { number } from './number.js';

echarts.use([BarChart, LineChart, ScatterChart, GridComponent, MarkAreaComponent, MarkLineComponent, TooltipComponent, CanvasRenderer]);

const FONT = 'system-ui, "Segoe UI", Roboto, "Noto Sans", "DejaVu Sans", sans-serif';
const live = new Map(); // element → chart

const PRINT = { ink: '#000', faint: '#666', hair: '#bbb', accent: '#0f6e78', band: 'rgba(0, 0, 0, 0.1)', paper: '#fff', line: '#666' };

function colours() {
  const style = getComputedStyle(document.documentElement);
  const get = (name) => (printing && PRINT[name]) || style.getPropertyValue(`--${name}`).trim();
  return { ink: get('ink'), faint: get('faint'), hair: get('hair'), accent: get('accent'), band: get('band'), paper: get('paper'), line: get('line') };
}

// fill replaces tokens: "@accent" by a colour, "@bin:3:rise" by the map's fill.
function fill(node, ink, palette) {
  if (Array.isArray(node)) return node.map((v) => fill(v, ink, palette));
  if (node && typeof node === 'object') {
    return Object.fromEntries(Object.entries(node).map(([k, v]) => [k, fill(v, ink, palette)]));
  }
  if (typeof node !== 'string' || node[0] !== '@') return node;
  const name = node.slice(1);
  if (name in ink) return ink[name];
  if (!palette) return node;
  const image = document.createElement('canvas');
  image.width = image.height = 60; // a whole number of every pattern's period
  drawLook(image, name, palette);
  return { image, repeat: 'repeat' };
}

function dress(options, ink) {
  const text = { color: ink.ink, fontFamily: FONT, fontSize: 15 };
  options.textStyle = { fontFamily: FONT, fontSize: 15, color: ink.ink };
  Object.assign(options.tooltip, {
    renderMode: 'richText', confine: true, backgroundColor: ink.paper, borderColor: ink.ink, borderWidth: 1,
    textStyle: { color: ink.ink, fontSize: 15 }, shadowBlur: 0, shadowColor: 'transparent',
  });
  for (const which of ['xAxis', 'yAxis']) {
    for (const axis of [].concat(options[which] ?? [])) {
      axis.axisLabel = { ...axis.axisLabel, ...text, hideOverlap: true };
      if (axis.type === 'value') axis.axisLabel.formatter = (v) => number(v, decimalsOf(v));
      if (axis.type === 'time') axis.axisLabel.formatter = '{MM}-{dd} {HH}:{mm}';
      // An end that was set to fit the dies is no round number worth a label.
      if (axis.min !== undefined && !Number.isInteger(axis.min)) axis.axisLabel.showMinLabel = false;
      if (axis.max !== undefined && !Number.isInteger(axis.max)) axis.axisLabel.showMaxLabel = false;
      axis.nameTextStyle = { ...text, align: which === 'yAxis' ? 'left' : 'center', padding: which === 'yAxis' ? [0, 0, 0, -56] : 0 };
      axis.axisLine = { show: true, lineStyle: { color: ink.faint } };
      axis.axisTick = { show: axis.type !== 'category', lineStyle: { color: ink.faint } };
      axis.splitLine = { show: axis.type === 'value' && axis.splitLine?.show !== false, lineStyle: { color: ink.hair } };
    }
  }
  for (const series of options.series ?? []) {
    if (series.type === 'bar') series.itemStyle = { borderColor: ink.line, borderWidth: options.yAxis?.[0]?.type === 'category' ? 1 : 0, ...series.itemStyle };
    if (series.markLine) Object.assign(series.markLine, { silent: true, animation: false });
    if (series.markArea) Object.assign(series.markArea, { silent: true });
    for (const mark of [series.markLine, series.markArea]) if (mark?.label) Object.assign(mark.label, { fontSize: 15 });
    if (series.name?.includes('sd') && series.type === 'line') Object.assign(series, { silent: true, tooltip: { show: false } });
  }
  return options;
}

function decimalsOf(v) {
  const s = String(Math.round(v * 1e6) / 1e6);
  return s.includes('.') ? s.split('.')[1].length : 0;
}

// On paper charts are drawn on the light ground at the size they have.
let printing = false;

function draw(figure) {
  const box = figure.querySelector('.chart');
  const block = figure.querySelector('script[type="application/json"]');
  const old = live.get(box);
  const size = printing && old ? { width: old.getWidth(), height: old.getHeight() } : { width: box.clientWidth, height: box.clientHeight };
  old?.dispose();
  const ink = colours();
  const data = readMapData();
  const palette = data && (isDark() && !printing ? data.palette.dark : data.palette.light);
  const chart = echarts.init(box, null, { renderer: 'canvas', ...size });
  const options = dress(fill(JSON.parse(block.textContent), ink, palette), ink);
  chart.setOption(options);
  live.set(box, chart);
  box.dataset.drawn = 'true';
  keys(figure, box, chart, options.series[0].data);
}

// keys walks the points of the first series and speaks them.
function keys(figure, box, chart, points) {
  let at = -1;
  box.onkeydown = (event) => {
    const step = { ArrowRight: 1, ArrowDown: 1, ArrowLeft: -1, ArrowUp: -1 }[event.key];
    if (event.key === 'Home') at = 0;
    else if (event.key === 'End') at = points.length - 1;
    else if (step) at = Math.min(Math.max(at + step, 0), points.length - 1);
    else return;
    event.preventDefault();
    chart.dispatchAction({ type: 'showTip', seriesIndex: 0, dataIndex: at });
    figure.querySelector('.chart-point').textContent = points[at]?.name ?? '';
  };
  box.onblur = () => chart.dispatchAction({ type: 'hideTip' });
}

function drawAll() {
  for (const [box, chart] of live) {
    if (box.isConnected) continue;
    chart.dispose();
    live.delete(box);
  }
  for (const figure of document.querySelectorAll('figure[data-chart]')) draw(figure);
}

drawAll();
for (const name of ['ground', 'parts']) document.addEventListener(name, drawAll);
new ResizeObserver(() => {
  if (!printing) live.forEach((chart, box) => chart.resize({ width: box.clientWidth, height: box.clientHeight }));
}).observe(document.body);
for (const [name, now] of [['beforeprint', true], ['afterprint', false]]) {
  window.addEventListener(name, () => {
    printing = now;
    drawAll();
  });
}
