// The specification's editor: a corner or an edge that is moved changes its
// numbers in the document, and the server bins all wafers looked at under the
// document as it stands. One request is under way at a time; the newest document
// goes next.
import { rewrite } from './rewrite.js';

export function startEditor() {
  const form = document.getElementById('editor');
  if (!form) return;
  new Editor(form);
}

class Editor {
  constructor(form) {
    this.form = form;
    this.text = form.elements.document;
    this.stored = this.text.value;
    this.fault = document.getElementById('fault');
    this.publish = form.querySelector('button[type=submit]');
    this.undo = document.getElementById('undo');
    this.before = look().dataset.good;
    this.busy = false;
    this.next = null;
    this.listen();
  }

  listen() {
    let typing = 0;
    this.text.addEventListener('input', () => {
      clearTimeout(typing);
      typing = setTimeout(() => this.try(false), 250);
    });
    document.addEventListener('pointerdown', (event) => this.take(event));
    document.addEventListener('keydown', (event) => this.key(event));
    this.undo.addEventListener('click', () => {
      this.text.value = this.stored;
      this.try(false);
    });
    this.form.addEventListener('submit', (event) => {
      event.preventDefault();
      this.store();
    });
  }

  // take follows a handle with the pointer until it is let go.
  take(event) {
    const handle = event.target.closest?.('.handle');
    if (!handle || event.button !== 0) return;
    event.preventDefault();
    const svg = handle.ownerSVGElement;
    const scale = scaleOf(svg);
    const base = this.text.value;
    const start = { x: event.clientX, y: event.clientY };
    const moves = movesOf(handle);
    const places = handle.dataset.places.split(' ').map(Number);
    let moved = false;
    const follow = (e) => {
      moved = true;
      const by = { x: (e.clientX - start.x) * scale.x, y: (start.y - e.clientY) * scale.y };
      this.text.value = rewrite(base, moves, by, places);
      this.try(true);
    };
    const stop = () => {
      window.removeEventListener('pointermove', follow);
      window.removeEventListener('pointerup', stop);
      window.removeEventListener('pointercancel', stop);
      document.body.classList.remove('moving');
      if (moved) this.try(false);
    };
    handle.focus?.({ preventScroll: true });
    document.body.classList.add('moving');
    window.addEventListener('pointermove', follow);
    window.addEventListener('pointerup', stop);
    window.addEventListener('pointercancel', stop);
  }

  // key moves the handle with the focus by its last decimal, by ten with Shift.
  key(event) {
    const handle = event.target.closest?.('.handle');
    const way = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] }[event.key];
    if (!handle || !way) return;
    event.preventDefault();
    const places = handle.dataset.places.split(' ').map(Number);
    const steps = event.shiftKey ? 10 : 1;
    const by = { x: way[0] * steps * 10 ** -places[0], y: way[1] * steps * 10 ** -places[1] };
    this.text.value = rewrite(this.text.value, movesOf(handle), by, places);
    this.try(false, nameOf(handle));
  }

  // try asks for the document as it stands; quick leaves risks and findings out
  // and keeps the drawing's scales.
  async try(quick, focus) {
    const changed = this.text.value !== this.stored;
    this.undo.disabled = !changed;
    if (this.busy) {
      this.next = { quick, focus };
      return;
    }
    this.busy = true;
    const asked = performance.now();
    if (!quick) document.body.setAttribute('aria-busy', 'true');
    try {
      const url = new URL(this.form.dataset.try, location.href);
      url.searchParams.set('measurements', this.form.dataset.measurements);
      if (changed) url.searchParams.set('before', this.before);
      if (quick) {
        url.searchParams.set('quick', 'yes');
        url.searchParams.set('boxes', boxes());
      }
      const answer = await fetch(url, { method: 'POST', headers: { 'Content-Type': 'application/yaml' }, body: this.text.value });
      if (answer.ok) {
        show(await answer.text(), quick, focus);
        requestAnimationFrame(() => {
          this.form.dataset.binnedMs = (performance.now() - asked).toFixed(1); // until the new tallies are on screen
        });
        this.say('');
        this.publish.disabled = !changed;
      } else {
        const problem = await answer.json().catch(() => ({}));
        this.say(problem.detail ?? `The server answered ${answer.status}.`);
        this.publish.disabled = true;
      }
    } catch (err) {
      this.say(`The server does not answer (${err.message}). Nothing is lost; try again.`);
    } finally {
      this.busy = false;
      document.body.removeAttribute('aria-busy');
    }
    if (this.next) {
      const { quick: q, focus: f } = this.next;
      this.next = null;
      this.try(q, f);
    }
  }

  say(text) {
    this.fault.textContent = text;
    this.fault.hidden = text === '';
  }

  async store() {
    const url = new URL(this.form.dataset.publish, location.href);
    url.searchParams.set('author', this.form.elements.author.value);
    url.searchParams.set('reason', this.form.elements.reason.value);
    this.publish.disabled = true;
    const answer = await fetch(url, { method: 'POST', headers: { 'Content-Type': 'application/yaml' }, body: this.text.value });
    const body = await answer.json().catch(() => ({}));
    if (answer.ok) {
      location.assign(`/bins/${encodeURIComponent(body.specification)}`);
      return;
    }
    this.say(body.detail ?? `The server answered ${answer.status}.`);
    this.publish.disabled = false;
  }
}

const look = () => document.querySelector('[data-part="look"]');

// scaleOf is how much a pixel on screen is worth in values.
function scaleOf(svg) {
  const { left, right, bottom, top, area } = svg.dataset;
  const [, , width, height] = area.split(' ').map(Number);
  const perUnit = svg.getBoundingClientRect().width / svg.viewBox.baseVal.width;
  return { x: (right - left) / (width * perUnit), y: (top - bottom) / (height * perUnit) };
}

function movesOf(handle) {
  return handle.dataset.moves.split(';').map((text) => {
    const [line, column, length, axis, value] = text.split(':');
    return { line: Number(line), column: Number(column), length: Number(length), axis, value: Number(value) };
  });
}

// nameOf finds a handle again after the drawing was replaced: by its plot and its
// number in it.
function nameOf(handle) {
  const svg = handle.ownerSVGElement;
  return { id: svg.id, at: [...svg.querySelectorAll('.handle')].indexOf(handle) };
}

const boxes = () =>
  [...document.querySelectorAll('svg.binplot')].map((s) => `${s.id}:${s.dataset.left},${s.dataset.right},${s.dataset.bottom},${s.dataset.top}`).join(';');

function show(html, quick, focus) {
  const next = new DOMParser().parseFromString(html, 'text/html').querySelector('[data-part="look"]');
  if (!next) return;
  const old = look();
  for (const svg of next.querySelectorAll('svg.binplot')) keepPicture(old, svg);
  if (quick) {
    for (const svg of next.querySelectorAll('svg.binplot')) {
      old.querySelector(`#${svg.id}`)?.replaceWith(document.importNode(svg, true));
    }
    for (const part of ['.verdict', 'table']) {
      const fresh = next.querySelector(part);
      if (fresh) old.querySelector(part)?.replaceWith(document.importNode(fresh, true));
    }
    return;
  }
  old.replaceWith(document.importNode(next, true));
  if (focus) document.getElementById(focus.id)?.querySelectorAll('.handle')[focus.at]?.focus({ preventScroll: true });
}

// keepPicture leaves the loaded picture of the dies in place where it is the same,
// so that it does not flicker.
function keepPicture(old, svg) {
  const image = svg.querySelector('image');
  const before = old.querySelector(`#${svg.id} image`);
  if (image && before && image.getAttribute('href') === before.getAttribute('href')) image.replaceWith(before);
}
