// Marks: a pixel and where it really is. The curve, its band and the residuals follow every move.
import { desk, edit, attempt, redraw, run, showTray, say } from './desk.js';
import { get, post, newestOnly } from './server.js';
import { make, field, sheet, facts, metres, degrees, percent } from './html.js';
import { ink } from './view.js';

let object = '';
let pending = null;  // {u_px, v_px}: clicked, waiting for its range
let asked = null;    // the pending mark whose form has had the focus
let chart = null;
export const timings = [];  // ms from a move to its curve on screen

const header = ['image', 'u_px', 'v_px', 'object', 'range_m', 'bearing_deg'];
const number = (value, digits) => String(+value.toFixed(digits));

function rowOf(mark) {
  return [mark.image || '', number(mark.u_px, 2), number(mark.v_px, 2), mark.object || '', number(mark.range_m, 4),
    mark.bearing_deg === null || mark.bearing_deg === undefined ? '' : number(mark.bearing_deg, 2)];
}

function change(mark) {
  return edit({ kind: 'row-change', file: 'marks.csv', line: mark.line, before: mark.text, columns: header, row: rowOf(mark) });
}

const preview = newestOnly((marks) => post('/api/preview/range', { marks }), (answer, marks, error) => {
  if (error) {
    desk.preview = { problem: error.message };
  } else {
    desk.preview = answer;
  }
  drawChart();
  document.getElementById('curve-facts')?.replaceChildren(curveFacts());
  redraw();
  // After the frame in which the views are painted.
  if (marks.started) requestAnimationFrame(() => timings.push(performance.now() - marks.started));
});

function marksWith(moved) {
  const marks = desk.bench.marks.map((mark) => (mark.line === moved.line ? moved : mark));
  marks.started = performance.now();
  return marks;
}

function near(mark, u, v, within) {
  return Math.hypot(mark.u_px - u, mark.v_px - v) < Math.max(within, 3);
}

function curve() {
  return desk.preview && !desk.preview.problem ? desk.preview : desk.bench.curve;
}

function curveFacts() {
  const data = curve();
  if (desk.preview?.problem) return make('p', { class: 's-refused' }, desk.preview.problem);
  if (!data) return '';
  return facts([['Model', data.model], ['Misfit', `${data.rms_px?.toFixed(2) ?? '–'} px RMS`],
    ['Leave-one-out', percent(data.leave_one_out_relative)], ['Reach', metres(data.reach_m)]]);
}

function drawChart() {
  const canvas = document.getElementById('curve');
  if (!canvas || !window.Chart) return;
  const data = curve();
  if (!data) return;
  const line = (key) => data.samples.map((s) => ({ x: s.radius_px, y: s[key] }));
  const datasets = [
    { label: 'band, 95 %', data: line('high_m'), borderWidth: 0, pointRadius: 0, fill: '+1', backgroundColor: ink('band') },
    { label: '', data: line('low_m'), borderWidth: 0, pointRadius: 0, fill: false },
    { label: 'curve', data: line('range_m'), borderColor: ink('accent'), borderWidth: 2, pointRadius: 0 },
    { label: 'marks', data: data.points.map((p) => ({ x: p.radius_px, y: p.range_m })), showLine: false, pointRadius: 4,
      borderColor: data.points.map((p) => ink(p.flagged ? 'bad' : 'ink')), backgroundColor: ink('sheet') },
  ];
  if (chart && chart.canvas === canvas) {
    chart.data.datasets.forEach((set, i) => Object.assign(set, datasets[i]));
    chart.update('none');
    return;
  }
  if (chart) chart.destroy();
  const axis = (text) => ({ type: 'linear', title: { display: true, text, color: ink('soft') }, ticks: { color: ink('soft') }, grid: { color: ink('rule') } });
  chart = new window.Chart(canvas, {
    type: 'line', data: { datasets },
    options: { animation: false, responsive: true, maintainAspectRatio: false, parsing: false,
      plugins: { legend: { labels: { color: ink('soft'), boxHeight: 2, filter: (item) => item.text } } },
      scales: { x: axis('radius from the centre, px'), y: axis('range, m') } },
  });
}

async function snap(u, v) {
  if (!object) return { u_px: u, v_px: v };
  const found = await attempt(() => get('/api/snap', { image: desk.image, u_px: u, v_px: v, object }));
  if (found && found.u_px !== undefined) return found;
  say('No blob of that object is here; the mark is put where you pointed.');
  return { u_px: u, v_px: v };
}

function addForm() {
  const about = `${pending.u_px} ${pending.v_px}`;
  const range = make('input', { id: 'mark-range', 'data-about': about, inputmode: 'decimal', placeholder: 'm', autocomplete: 'off' });
  const bearing = make('input', { id: 'mark-bearing', 'data-about': about, inputmode: 'decimal', placeholder: 'deg, or empty', autocomplete: 'off' });
  const add = async () => {
    const mark = { ...pending, image: desk.image, object, range_m: Number(range.value.replace(',', '.')),
      bearing_deg: bearing.value.trim() === '' ? null : Number(bearing.value.replace(',', '.')) };
    if (!(mark.range_m > 0) || Number.isNaN(mark.bearing_deg)) {
      say('Range must be a number of metres above 0; bearing a number of degrees, or empty.');
      return;
    }
    pending = null;
    desk.draft = null;
    await edit({ kind: 'row-add', file: 'marks.csv', columns: header, row: rowOf(mark) });
    document.getElementById('ring').focus();
  };
  const form = make('form', { onsubmit: (event) => { event.preventDefault(); add(); } },
    make('div', { class: 'row' }, field('Range from the axis, m', range), field('Bearing, degrees', bearing),
      make('button', { class: 'main', type: 'submit', id: 'mark-add' }, 'Add mark')),
    make('p', {}, `at pixel ${pending.u_px.toFixed(1)}, ${pending.v_px.toFixed(1)}${object ? ` (${object})` : ' (floor)'}`));
  if (asked !== pending) {
    asked = pending;
    setTimeout(() => range.focus(), 0);
  }
  return form;
}

function changeForm(mark) {
  const range = make('input', { id: 'picked-range', 'data-about': mark.text, inputmode: 'decimal', value: mark.range_m });
  const bearing = make('input', { id: 'picked-bearing', 'data-about': mark.text, inputmode: 'decimal', value: mark.bearing_deg ?? '' });
  const apply = () => change({ ...mark, range_m: Number(range.value.replace(',', '.')),
    bearing_deg: bearing.value.trim() === '' ? null : Number(bearing.value.replace(',', '.')) });
  return make('form', { onsubmit: (event) => { event.preventDefault(); apply(); } },
    make('div', { class: 'row' }, field('Range, m', range), field('Bearing, degrees', bearing),
      make('button', { type: 'submit', class: 'main' }, 'Change'),
      make('button', { type: 'button', id: 'mark-remove', onclick: () => {
        desk.picked = null;
        edit({ kind: 'row-change', file: 'marks.csv', line: mark.line, before: mark.text, row: null });
      } }, 'Remove')));
}

export const marks = {
  id: 'marks', name: 'Range', title: 'Marks and range curve', step: 'range',
  ringHelp: 'Click a place whose distance you have taped; drag a mark to move it.',
  planHelp: 'Drag a mark to where it really was.',
  async onRing(u, v) {
    const hit = desk.bench.marks.find((mark) => near(mark, u, v, 6));
    if (hit) {
      desk.picked = { kind: 'mark', line: hit.line };
      pending = null;
    } else {
      pending = await snap(u, v);
      desk.picked = null;
      desk.draft = { shape: 'grow', points: `${pending.u_px} ${pending.v_px}` };
    }
    showTray();
    redraw();
  },
  onRingDrag(u, v, within) {
    const mark = desk.bench.marks.find((one) => near(one, u, v, within) && (!one.image || one.image === desk.image));
    if (!mark) return null;
    return {
      move(u2, v2) {
        desk.movedMark = { ...mark, u_px: u2, v_px: v2 };
        if (desk.bench.has_range) preview(marksWith(desk.movedMark));
        redraw();
      },
      async drop(u2, v2) {
        await change({ ...mark, u_px: u2, v_px: v2 });
        desk.movedMark = null;
        redraw();
      },
    };
  },
  onPlanDrag(x, y, within) {
    const mark = desk.bench.marks.find((one) => one.bearing_deg !== null && one.bearing_deg !== undefined && Math.hypot(
      one.range_m * Math.cos(one.bearing_deg * Math.PI / 180) - x, one.range_m * Math.sin(one.bearing_deg * Math.PI / 180) - y) < within);
    if (!mark) return null;
    const at = (x2, y2) => ({ ...mark, range_m: Math.max(0.01, Math.hypot(x2, y2)), bearing_deg: Math.atan2(y2, x2) * 180 / Math.PI });
    return {
      move(x2, y2) {
        desk.movedFloor = at(x2, y2);
        if (desk.bench.has_range) preview(marksWith(desk.movedFloor));
        redraw();
      },
      async drop(x2, y2) {
        await change(at(x2, y2));
        desk.movedFloor = null;
        redraw();
      },
    };
  },
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'range');
    const data = curve();
    const picked = desk.picked && bench.marks.find((mark) => mark.line === desk.picked.line);
    setTimeout(drawChart, 0);
    return [
      make('div', { class: 'row' }, field('A mark is on', make('select', {
        id: 'mark-object', onchange: (event) => { object = event.target.value; desk.heightObject = object; },
      }, make('option', { value: '', selected: object === '' }, 'the floor'),
        ...bench.objects.map((one) => make('option', { value: one.name, selected: object === one.name }, one.name)))),
        make('button', { type: 'button', onclick: () => attempt(async () => {
          const advice = await get('/api/advise');
          desk.advice = advice.spots;
          desk.adviceWhy = `${advice.enough ? 'You can stop' : 'Go on'}: ${advice.why}`;
          showTray();
          redraw();
        }) }, 'Where to measure next'),
        make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('range') }, 'Fit')),
      pending ? addForm() : null,
      picked ? changeForm(picked) : null,
      desk.advice && desk.advice.length ? make('p', {}, make('strong', {}, 'Measure next: '),
        `${metres(desk.advice[0].range_m)} at ${degrees(desk.advice[0].bearing_deg, 0)}. ${desk.advice[0].text || ''} ${desk.adviceWhy || ''}`) : null,
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      data ? make('div', { class: 'plot' }, make('canvas', { id: 'curve', role: 'img', 'aria-label': 'Range against radius, with band and marks' })) : null,
      make('div', { id: 'curve-facts' }, curveFacts()),
      bench.marks.length ? sheet(['Mark', 'Range, m', 'Bearing, °', 'u, v px', ''], bench.marks.map((mark) => [
        mark.object || 'floor', mark.range_m.toFixed(3), mark.bearing_deg?.toFixed(1) ?? '–',
        `${mark.u_px.toFixed(1)}, ${mark.v_px.toFixed(1)}`,
        make('button', { type: 'button', 'aria-label': `Pick mark on line ${mark.line}`, onclick: () => {
          desk.picked = { kind: 'mark', line: mark.line };
          showTray();
          redraw();
        } }, 'pick')]), [1, 2, 3],
      (r) => [bench.flagged.includes(bench.marks[r].line) ? 'flagged' : '', desk.picked?.line === bench.marks[r].line ? 'picked' : ''].join(' ').trim())
        : make('p', { class: 'empty' }, 'No marks yet. Put the tape on the floor under the robot’s axis, click a thing you measured, type its range.'),
      ...(bench.flag_reasons || []).map((reason) => make('p', { class: 's-refused' }, reason)),
    ];
  },
};
window.deskTimings = timings;
