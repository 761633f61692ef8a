// Colours: swatches painted on frames, the sets found, and what moving an edge costs.
import { desk, edit, attempt, load, redraw, run, showClasses, showFrame, showTray } from './desk.js';
import { get, post, newestOnly } from './server.js';
import { make, field, sheet, percent } from './html.js';
import { ink } from './view.js';

let label = '';
let tool = 'grow';
let corners = [];
let shown = '';       // object whose planes are drawn
let trial = null;     // boxes being dragged: {object, boxes}
let trialAnswer = null;
const densities = {};  // object -> {stamp, planes}

const header = ['image', 'label', 'shape', 'points'];
const text = (...n) => n.map((x) => String(+x.toFixed(1))).join(' ');

function add(shape, points) {
  return edit({ kind: 'row-add', file: 'swatches.csv', columns: header, row: [desk.image, label, shape, points] });
}

const ask = newestOnly((boxes) => post('/api/preview/colours', boxes), (answer) => {
  trialAnswer = answer;
  showTray();
});

// How common each colour is, fetched once for as long as swatches and mask stay the same.
function densitiesOf(bench, object) {
  const stamp = `${bench.files['swatches.csv']?.sha} ${bench.mask_stamp}`;
  if (densities[object]?.stamp === stamp) return densities[object].planes;
  densities[object] = { stamp, planes: null };
  get('/api/densities', { object }).then((planes) => {
    densities[object].planes = planes;
    if (desk.station === 'colours') showTray();
  }).catch(() => {});
  return null;
}

// The two planes of a set: hue-saturation and saturation-value, densities below, boxes above.
function plane(object, name, xKey, yKey, xMax, yMax, counts, boxes) {
  const canvas = make('canvas', { width: 260, height: 170, style: 'width:100%;touch-action:none', tabindex: '0', role: 'application',
    'aria-label': `${name} plane of ${object}; drag an edge of a box` });
  const context = canvas.getContext('2d');
  const sx = (x) => x * canvas.width / (xMax + 1);
  const sy = (y) => canvas.height - y * canvas.height / (yMax + 1);
  const paint = () => {
    context.fillStyle = ink('floor');
    context.fillRect(0, 0, canvas.width, canvas.height);
    for (const [key, colour] of [['surroundings', ink('soft')], ['object', ink('wait')]]) {
      const grid = counts?.[key];
      if (!grid) continue;
      context.fillStyle = colour;
      grid.forEach((row, j) => row.forEach((value, i) => {
        if (!value) return;
        context.globalAlpha = Math.min(1, 0.15 + 0.85 * value);
        const w = canvas.width / row.length;
        const h = canvas.height / grid.length;
        context.fillRect(i * w, canvas.height - (j + 1) * h, w + 0.5, h + 0.5);
      }));
      context.globalAlpha = 1;
    }
    context.strokeStyle = ink('accent');
    context.lineWidth = 2;
    for (const box of boxes) {
      const [x0, x1] = box[xKey];
      const [y0, y1] = box[yKey];
      const spans = xKey === 'h' && x0 > x1 ? [[x0, xMax], [0, x1]] : [[x0, x1]];
      for (const [from, to] of spans) context.strokeRect(sx(from), sy(y1 + 1), sx(to + 1) - sx(from), sy(y0) - sy(y1 + 1));
    }
  };
  paint();
  let held = null;
  const at = (event) => {
    const box = canvas.getBoundingClientRect();
    return [(event.clientX - box.left) / box.width * (xMax + 1), (1 - (event.clientY - box.top) / box.height) * (yMax + 1)];
  };
  canvas.addEventListener('pointerdown', (event) => {
    const [x, y] = at(event);
    let best = null;
    boxes.forEach((box, i) => {
      for (const [key, value, max] of [[xKey, x, xMax], [yKey, y, yMax]]) {
        box[key].forEach((edge, end) => {
          const distance = Math.abs(edge - value) / max;
          if (distance < 0.06 && (!best || distance < best.distance)) best = { distance, box: i, key, end };
        });
      }
    });
    held = best;
    if (held) canvas.setPointerCapture(event.pointerId);
  });
  canvas.addEventListener('pointermove', (event) => {
    if (!held) return;
    const [x, y] = at(event);
    const max = held.key === 'h' ? 179 : 255;
    boxes[held.box][held.key][held.end] = Math.max(0, Math.min(max, Math.round(held.key === xKey ? x : y)));
    trial = { object, boxes };
    paint();
  });
  canvas.addEventListener('pointerup', () => {
    if (held && trial) ask(trial);
    held = null;
  });
  return make('figure', { style: 'margin:0.4rem 0' }, canvas, make('figcaption', { style: 'font-size:0.8rem;color:var(--soft)' }, name));
}

export const colours = {
  id: 'colours', name: 'Colours', title: 'Thresholds', step: 'colours',
  ringHelp: 'Choose what you paint, then click (grow, polygon) or drag (box, disc) on the ring.',
  onRing(u, v) {
    if (!label || !desk.image) return;
    if (tool === 'grow') add('grow', text(u, v));
    if (tool === 'polygon') {
      const first = corners[0];
      if (corners.length > 2 && Math.hypot(first[0] - u, first[1] - v) < 4) {
        const points = text(...corners.flat());
        corners = [];
        desk.draft = null;
        add('polygon', points);
        return;
      }
      corners.push([u, v]);
      desk.draft = { shape: 'line', points: text(...corners.flat()) };
      redraw();
    }
  },
  onRingDrag(u, v, within, event) {
    if (!label || event.shiftKey || !['box', 'disc'].includes(tool)) return null;
    const points = (u2, v2) => (tool === 'disc' ? text(u, v, Math.max(1, Math.hypot(u2 - u, v2 - v)))
      : text(Math.min(u, u2), Math.min(v, v2), Math.max(u, u2), Math.max(v, v2)));
    return {
      move(u2, v2) {
        desk.draft = { shape: tool, points: points(u2, v2) };
        redraw();
      },
      async drop(u2, v2) {
        desk.draft = null;
        await add(tool, points(u2, v2));
      },
    };
  },
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'colours');
    const sets = bench.colours ? Object.entries(bench.colours.objects) : [];
    if (!shown && sets.length) shown = sets[0][0];
    const names = [...bench.objects.map((object) => object.name), 'surroundings'];
    const mine = bench.swatches.filter((swatch) => swatch.image === desk.image);
    const set = sets.find(([name]) => name === shown);
    const boxes = trial && trial.object === shown ? trial.boxes : set ? structuredClone(set[1].boxes) : [];
    const planes = set ? densitiesOf(bench, shown) : null;
    const lights = [...new Set(bench.frames.map((frame) => frame.light))];
    return [
      make('div', { class: 'row' },
        field('Paint', make('select', { id: 'swatch-label', onchange: (event) => { label = event.target.value; } },
          make('option', { value: '' }, 'nothing'), ...names.map((name) => make('option', { value: name, selected: label === name }, name)))),
        field('With', make('select', { id: 'swatch-tool', onchange: (event) => { tool = event.target.value; corners = []; } },
          ...['grow', 'box', 'disc', 'polygon'].map((name) => make('option', { value: name, selected: tool === name }, name)))),
        make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('colours') }, 'Search')),
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      mine.length ? sheet(['Swatch here', 'Shape', ''], mine.map((swatch) => [swatch.label, swatch.shape, make('button', {
        type: 'button', 'aria-label': `Remove swatch on line ${swatch.line}`,
        onclick: () => edit({ kind: 'row-change', file: 'swatches.csv', line: swatch.line, before: swatch.text, row: null }),
      }, 'remove')])) : make('p', { class: 'empty' }, 'No swatches in this frame. Paint each object, in every light, near and far.'),
      sets.length ? sheet(['Object', 'Worst light', 'Recall', 'False', ''], sets.map(([name, one]) => [
        name, one.worst_light || '–', percent(one.score), one.false_positive_rate?.toExponential(1) ?? '–',
        make('button', { type: 'button', 'aria-pressed': String(shown === name), onclick: () => { shown = name; trial = null; trialAnswer = null; showTray(); } }, 'planes')]), [2, 3]) : null,
      set ? plane(shown, 'Hue (across) and saturation (up)', 'h', 's', 179, 255, planes?.hs, boxes) : null,
      set ? plane(shown, 'Saturation (across) and value (up)', 's', 'v', 255, 255, planes?.sv, boxes) : null,
      trialAnswer ? make('div', {}, make('h3', {}, 'With the edges as dragged'),
        sheet(['Light', 'Recall', 'False'], trialAnswer.lights.map((one) => [one.light || 'unnamed', percent(one.recall), one.false_positive_rate.toExponential(1)]), [1, 2]),
        make('button', { type: 'button', onclick: () => { trial = null; trialAnswer = null; showTray(); } }, 'Back to the set found')) : null,
      sets.length ? make('div', {}, make('h3', {}, 'The sets over every light'), make('div', { class: 'shots' }, ...lights.map((light) => {
        const image = bench.frames.find((frame) => frame.light === light).image;
        return make('button', { type: 'button', onclick: () => attempt(async () => { desk.layers.classes = true; await showFrame(image); await showClasses(); await load(); }) },
          make('img', { src: '/api/classes?' + new URLSearchParams({ image, over: 'yes', stamp: bench.colours_stamp || '' }), alt: `thresholds over ${image}` }), light || 'unnamed');
      }))) : null,
    ];
  },
};
