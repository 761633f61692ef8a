// The desk: what is known of the venue, the two views of it, and the station in the tray.
import { get, post, newestOnly } from './server.js';
import { View, ink, cross } from './view.js';
import { make, metres, degrees } from './html.js';
import { drawRing } from './ring.js';
import { drawPlan, planBounds } from './plan.js';
import { stations } from './stations.js';

const $ = (id) => document.getElementById(id);

// Everything the page knows. Stations read it; only load() and the views write it.
export const desk = {
  bench: null,          // the server's answer about the venue
  station: 'frames',
  image: '',            // frame shown in the ring
  picture: null,        // its decoded image
  maskPicture: null,
  classPicture: null,
  layers: { rim: true, mask: true, marks: true, swatches: true, classes: false },
  pointed: null,        // {u_px, v_px, range_m, bearing_deg, band..., from}
  heightObject: '',
  picked: null,         // {kind: 'mark', line}
  preview: null,        // range curve while marks move
  advice: null,
  progress: null,
};

export function say(text) {
  const line = make('p', {}, text);
  $('says').append(line);
  setTimeout(() => line.remove(), 9000);
}

export async function attempt(action) {
  try {
    return await action();
  } catch (error) {
    say(error.message);
    if (error.status === 409) await load();
    return null;
  }
}

// Every change goes through here: made on disk by the server, then shown.
export async function edit(change) {
  return attempt(async () => {
    await post('/api/edit', change);
    await load();
    return true;
  });
}

let ringView = null;
let planView = null;
export function redraw() {
  ringView.redraw();
  planView.redraw();
}

// ---- loading --------------------------------------------------------------------------------

let loadings = Promise.resolve();
export function load() {
  loadings = loadings.then(loadNow).catch((error) => say(error.message));
  return loadings;
}

async function loadNow() {
  const bench = await get('/api/bench');
  const before = desk.bench;
  desk.bench = bench;
  const images = bench.frames.map((frame) => frame.image);
  if (!images.includes(desk.image)) await showFrame(images[0] || '');
  if (!before || before.mask_stamp !== bench.mask_stamp) {
    desk.maskPicture = bench.mask_stamp ? await picture('/api/mask?stamp=' + bench.mask_stamp) : null;
  }
  desk.preview = null;
  showAll();
}

async function picture(address) {
  const response = await fetch(address);
  if (!response.ok) return null;
  return createImageBitmap(await response.blob());
}

export async function showFrame(image) {
  desk.image = image;
  const frame = desk.bench.frames.find((one) => one.image === image);
  desk.picture = image && frame && !frame.problem ? await picture('/api/frame?' + new URLSearchParams({ image })) : null;
  await showClasses();
  const choice = $('frame-choice');
  if (choice.value !== image) choice.value = image;
  if (ringView) {
    ringView.fitted = false;
    redraw();
  }
}

export async function showClasses() {
  desk.classPicture = desk.layers.classes && desk.picture && desk.bench.colours
    ? await picture('/api/classes?' + new URLSearchParams({ image: desk.image })) : null;
  if (ringView) redraw();
}

// ---- the path -------------------------------------------------------------------------------

const words = { fresh: 'fresh', stale: 'stale', missing: 'not yet', refused: 'refused' };

function glyph(state) {
  const inside = {
    fresh: '<circle cx="12" cy="12" r="5" fill="currentColor"/>',
    stale: '<path d="M12 7a5 5 0 0 1 0 10z" fill="currentColor"/>',
    refused: '<path d="M8.5 8.5l7 7M15.5 8.5l-7 7" stroke="currentColor" stroke-width="2"/>',
    missing: '',
  }[state];
  const span = make('span', { 'aria-hidden': 'true', class: 's-' + state });
  span.innerHTML = `<svg viewBox="0 0 24 24"><circle cx="12" cy="12" r="9" fill="none" stroke="currentColor"` +
    ` stroke-width="2"${state === 'missing' ? ' stroke-dasharray="3 3"' : ''}/>${inside}</svg>`;
  return span;
}

function stateOf(station) {
  const bench = desk.bench;
  if (station.state) return station.state(bench);
  const step = bench.steps.find((one) => one.name === station.step);
  return step ? step.state : 'missing';
}

function showPath() {
  $('path').replaceChildren(...stations.map((station) => {
    const state = stateOf(station);
    return make('button', {
      type: 'button', 'aria-current': desk.station === station.id ? 'step' : null,
      'aria-label': `${station.name}: ${words[state]}`, onclick: () => go(station.id),
    }, glyph(state), make('span', {}, station.name), make('span', { class: 'state' }, words[state]));
  }));
}

export function go(id) {
  desk.station = id;
  desk.picked = null;
  showAll();
}

function showNext() {
  const bench = desk.bench;
  const box = $('next');
  if (desk.progress) {
    const { what, part, done, total } = desk.progress;
    box.replaceChildren(
      make('span', { class: 'what' }, total ? `${what}: ${part} ${done} of ${total}` : `${what} …`),
      make('progress', { max: total || 1, value: total ? done : undefined, 'aria-label': what }),
      make('button', { type: 'button', onclick: () => attempt(() => post('/api/cancel')) }, 'Stop'));
    return;
  }
  const next = bench.next;
  box.replaceChildren(...[
    make('span', { class: 'what' }, make('strong', {}, 'Next: '), next.text),
    next.run ? make('button', { type: 'button', class: 'main', id: 'next-run', onclick: () => run(next.run) }, next.label) : null,
    !next.run && next.station && next.station !== desk.station
      ? make('button', { type: 'button', class: 'main', onclick: () => go(next.station) }, next.label) : null,
  ].filter(Boolean));
}

export function run(step, extra = {}) {
  return attempt(() => post('/api/run', { step, ...extra }));
}

// ---- pointing: one place, two views ----------------------------------------------------------

const askPlace = newestOnly((question) => get('/api/place', question), (answer, question) => {
  if (!answer) return;
  desk.pointed = { ...answer, from: question.u_px !== undefined ? 'ring' : 'plan' };
  showReading();
  redraw();
});

function showReading() {
  const p = desk.pointed;
  let text = '';
  if (p && p.range_m !== undefined) {
    text = `${metres(p.range_m)}` +
      (p.band95_m ? ` (${p.band95_m[0].toFixed(2)}–${p.band95_m[1].toFixed(2)})` : '') +
      ` · ${degrees(p.bearing_deg)}`;
    if (p.visible === false) text += ' · hidden';
  } else if (p && p.u_px !== undefined) {
    text = `pixel ${p.u_px.toFixed(1)}, ${p.v_px.toFixed(1)}` + (desk.bench.has_range ? ' · no floor here' : '');
  }
  $('reading').textContent = text;
}

function pointAtPixel(u, v) {
  desk.pointed = { u_px: u, v_px: v, from: 'ring' };
  if (desk.bench.has_range) askPlace({ u_px: u, v_px: v, object: desk.heightObject });
  showReading();
  redraw();
}

function pointAtFloor(x, y) {
  const range = Math.hypot(x, y);
  const bearing = Math.atan2(y, x) * 180 / Math.PI;
  desk.pointed = { range_m: range, bearing_deg: bearing, from: 'plan' };
  if (desk.bench.has_range) askPlace({ range_m: range, bearing_deg: bearing, object: desk.heightObject });
  showReading();
  redraw();
}

const here = () => stations.find((station) => station.id === desk.station);

function makeViews() {
  ringView = new View($('ring'), {
    step: 1,
    bounds: () => ({ x0: -0.5, y0: -0.5, x1: desk.bench.rig.width_px - 0.5, y1: desk.bench.rig.height_px - 0.5 }),
    draw: (context, view) => drawRing(context, view, desk),
    onPoint: pointAtPixel,
    onAct: (u, v, event) => here().onRing?.(u, v, event),
    onDragStart: (u, v, event) => here().onRingDrag?.(u, v, 8 / ringView.scale, event) || null,
    onDrag: (handle, u, v) => handle.move(u, v),
    onDrop: (handle, u, v) => handle.drop(u, v),
  });
  // The plan has x (forward) up and y (left) to the left: own coordinates are (-y, x).
  planView = new View($('plan'), {
    step: 0.01, flip: true,
    bounds: () => planBounds(desk),
    draw: (context, view) => drawPlan(context, view, desk),
    onPoint: (a, b) => pointAtFloor(b, -a),
    onAct: (a, b, event) => here().onPlan?.(b, -a, event),
    onDragStart: (a, b, event) => here().onPlanDrag?.(b, -a, 10 / planView.scale, event) || null,
    onDrag: (handle, a, b) => handle.move(b, -a),
    onDrop: (handle, a, b) => handle.drop(b, -a),
  });
  window.deskViews = { ring: ringView, plan: planView };
}

function showLayers() {
  const names = { rim: 'rim', mask: 'mask', marks: 'marks', swatches: 'swatches', classes: 'colours' };
  $('ring-layers').replaceChildren(...Object.entries(names).map(([id, name]) =>
    make('label', {}, make('input', {
      type: 'checkbox', checked: desk.layers[id],
      onchange: (event) => {
        desk.layers[id] = event.target.checked;
        if (id === 'classes') showClasses();
        redraw();
      },
    }), name)));
}

function showFrames() {
  const choice = $('frame-choice');
  choice.replaceChildren(...desk.bench.frames.map((frame) =>
    make('option', { value: frame.image }, frame.image.replace(/^frames\//, ''))));
  if (!desk.bench.frames.length) choice.append(make('option', { value: '' }, 'no frames yet'));
  choice.value = desk.image;
}

export function showTray() {
  const station = here();
  const tray = $('tray');
  const focus = document.activeElement && tray.contains(document.activeElement) ? document.activeElement : null;
  // What is half typed stays when the tray is made anew under it.
  const typed = [...tray.querySelectorAll('input[data-typed]')].map((input) => [input.id, input.dataset.about, input.value]);
  const scrolled = tray.scrollTop;
  tray.replaceChildren(make('h2', {}, station.title), ...station.tray(desk.bench).filter(Boolean));
  for (const [id, about, value] of typed) {
    const input = id && document.getElementById(id);
    if (!input || input.dataset.about !== about) continue;
    input.value = value;
    input.dataset.typed = 'yes';
  }
  tray.scrollTop = scrolled;
  if (focus && focus.id && document.getElementById(focus.id)) {
    const again = document.getElementById(focus.id);
    again.focus();
    if (focus.selectionStart !== null && focus.selectionStart !== undefined && again.setSelectionRange && again.type === 'text') {
      again.setSelectionRange(focus.selectionStart, focus.selectionEnd);
    }
  }
  $('ring-help').textContent = station.ringHelp || '';
  $('plan-help').textContent = station.planHelp || '';
}

function showAll() {
  const bench = desk.bench;
  $('venue-name').textContent = bench.name || 'Rondel';
  $('venue-folder').textContent = bench.folder;
  document.title = `${bench.name || 'Rondel'} – desk`;
  $('undo').disabled = !bench.undo;
  $('redo').disabled = !bench.redo;
  showPath();
  showNext();
  showLayers();
  showFrames();
  showTray();
  redraw();
}

// ---- events ---------------------------------------------------------------------------------

function listen() {
  const events = new EventSource('/api/events');
  const data = (event) => JSON.parse(event.data);
  events.addEventListener('started', (event) => { desk.progress = { what: data(event).what }; showNext(); });
  events.addEventListener('progress', (event) => { desk.progress = data(event); showNext(); });
  events.addEventListener('note', (event) => say(data(event).text));
  events.addEventListener('ended', (event) => {
    const ended = data(event);
    desk.progress = null;
    if (ended.problems) say(ended.problems.join('\n'));
    else if (ended.result?.batch) say(ended.result.summary);
    if (ended.fault) say('A fault of Rondel’s own: ' + ended.fault);
    if (ended.cancelled) say(`${ended.what}: stopped`);
    load();
  });
  events.addEventListener('changed', (event) => { if (data(event).stamp !== desk.bench.stamp) load(); });
  events.onerror = () => {
    if ($('next').dataset.lost) return;
    $('next').dataset.lost = 'yes';
    setTimeout(() => {
      if ($('next').dataset.lost) $('next').replaceChildren(make('span', { class: 'what s-refused' },
        'The desk’s program does not answer. All that was done is on disk; start it again with: rondel desk'));
    }, 8000);
  };
  events.onopen = () => {
    if ($('next').dataset.lost) load();
    delete $('next').dataset.lost;
  };
}

async function start() {
  desk.bench = await get('/api/bench');
  makeViews();
  $('frame-choice').addEventListener('change', (event) => showFrame(event.target.value));
  $('tray').addEventListener('input', (event) => {
    if (event.target.tagName === 'INPUT' && event.target.type === 'text') event.target.dataset.typed = 'yes';
  });
  const step = (way) => attempt(async () => {
    await post('/api/' + way);
    await load();
  });
  $('undo').addEventListener('click', () => step('undo'));
  $('redo').addEventListener('click', () => step('redo'));
  document.addEventListener('keydown', (event) => {
    const typing = /^(INPUT|TEXTAREA|SELECT)$/.test(event.target.tagName);
    if ((event.ctrlKey || event.metaKey) && !typing && event.key.toLowerCase() === 'z') {
      event.preventDefault();
      step(event.shiftKey ? 'redo' : 'undo');
    }
  });
  matchMedia('(prefers-color-scheme: dark)').addEventListener('change', () => { redraw(); showTray(); });
  desk.station = desk.bench.next.station || 'frames';
  if (desk.bench.running) desk.progress = { what: desk.bench.running };
  await load();
  listen();
}

start().catch((error) => say(error.message));
export { ink, cross };
