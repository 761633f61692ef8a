// Mask: seen as a veil over the ring; strokes with the brush hide or show.
import { desk, edit, attempt, redraw, run, showTray } from './desk.js';
import { make, field, facts, metres, percent } from './html.js';

let kind = '';  // '', 'hide' or 'show'
let width = 8;
let drawn = [];

const header = ['kind', 'width_px', 'points'];

export const mask = {
  id: 'mask', name: 'Mask', title: 'The robot in its own view', step: 'mask',
  ringHelp: 'Choose a brush, then draw on the ring. Shift and drag moves the picture.',
  planHelp: 'Shaded floor is hidden by the robot.',
  onRingDrag(u, v, within, event) {
    if (!kind || event.shiftKey) return null;
    drawn = [[u, v]];
    return {
      move(u2, v2) {
        const last = drawn[drawn.length - 1];
        if (Math.hypot(u2 - last[0], v2 - last[1]) < 1.5) return;
        drawn.push([u2, v2]);
        desk.draft = { shape: 'line', points: drawn.flat().map((n) => n.toFixed(1)).join(' ') };
        redraw();
      },
      async drop() {
        const points = drawn.flat().map((n) => n.toFixed(1)).join(' ');
        await edit({ kind: 'row-add', file: 'strokes.csv', columns: header, row: [kind, String(width), points] });
        desk.draft = null;
        await run('mask');
      },
    };
  },
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'mask');
    const brush = (id, name) => make('button', {
      type: 'button', id: 'brush-' + id, 'aria-pressed': String(kind === id), onclick: () => {
        kind = kind === id ? '' : id;
        showTray();
      },
    }, name);
    return [
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      bench.mask ? facts([
        ['May show floor', percent(bench.mask.visible_fraction) + ' of the pixels'],
        ['Frames used', String(bench.mask.frames_used)],
        ['Hidden floor reaches', bench.blind_zone ? metres(Math.max(...bench.blind_zone.map((zone) => zone.to_m))) : 'known after the range step'],
      ]) : make('p', { class: 'empty' }, 'No mask yet. It is found from frames between which the robot turned.'),
      make('div', { class: 'row' }, brush('hide', 'Brush: hide'), brush('show', 'Brush: show floor'),
        field('Width, px', make('input', { id: 'brush-width', type: 'number', min: 1, max: 60, value: width, onchange: (event) => { width = Number(event.target.value) || 8; } }))),
      bench.strokes.length ? make('div', {}, make('h3', {}, 'Strokes'), ...bench.strokes.map((stroke) => make('div', { class: 'row' },
        make('span', {}, `${stroke.kind}, ${stroke.width_px} px wide`),
        make('button', { type: 'button', onclick: () => attempt(async () => {
          await edit({ kind: 'row-change', file: 'strokes.csv', line: stroke.line, before: stroke.text, row: null });
          await run('mask');
        }) }, 'Remove')))) : null,
      make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('mask') }, 'Find the mask'),
    ];
  },
};
