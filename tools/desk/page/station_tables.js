// Tables: what the boards carry; sliders answer at once, 'write' puts them into venue.yaml.
import { attempt, load, run, showTray } from './desk.js';
import { post, newestOnly } from './server.js';
import { make, facts, sheet, metres, percent } from './html.js';

let tried = null;     // {near_m, far_m, range_bits, baud, table_bytes}
let answer = null;

const ask = newestOnly((link) => post('/api/preview/tables', link), (result, link, error) => {
  answer = error ? { problem: error.message } : result;
  showTray();
});

const bauds = [9600, 19200, 38400, 57600, 115200, 230400];

export const tables = {
  id: 'tables', name: 'Tables', title: 'Tables and line', step: 'tables',
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'tables');
    const link = tried || { ...bench.link };
    const slider = (key, name, min, max, unit, stepSize) => {
      const shown = make('output', {}, `${link[key]} ${unit}`);
      const input = make('input', { id: 'link-' + key, type: 'range', 'aria-label': name, min, max, step: stepSize, value: link[key], oninput: (event) => {
        tried = { ...link, ...tried, [key]: Number(event.target.value) };
        shown.textContent = `${tried[key]} ${unit}`;
        ask(tried);
      } });
      return make('label', { class: 'field' }, make('span', {}, name, ' ', shown), input);
    };
    const t = answer && !answer.problem ? answer : bench.tables;
    const made = bench.artefacts || [];
    return [
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      slider('near_m', 'Nearest range', 0.05, 0.5, 'm', 0.01),
      slider('far_m', 'Farthest range', 1, 8, 'm', 0.1),
      slider('range_bits', 'Range bits', 4, 7, 'bits', 1),
      slider('table_bytes', 'Table budget', 128, 4096, 'bytes', 32),
      make('label', { class: 'field' }, 'Baud', make('select', { id: 'link-baud', onchange: (event) => {
        tried = { ...link, baud: Number(event.target.value) };
        ask(tried);
      } }, ...bauds.map((baud) => make('option', { value: baud, selected: baud === link.baud }, String(baud))))),
      answer?.problem ? make('p', { class: 's-refused' }, answer.problem) : null,
      t ? facts([
        ['Codes', t.codebook ? `${t.codebook.codes}, ${metres(t.codebook.near_m)} to ${metres(t.codebook.far_m)}` : null],
        ['Worst code error', t.codebook ? percent(t.codebook.worst_relative_error) : null],
        ['Bytes on the board', t.bytes ? Object.entries(t.bytes).map(([name, size]) => `${name} ${size}`).join(', ') : null],
        ['Line', t.link ? `${t.link.bytes_per_report} bytes a report, ${percent(t.link.utilisation, 0)} of the line, ${t.link.latency_ms.toFixed(1)} ms` : null],
      ]) : null,
      tried ? make('div', { class: 'row' },
        make('button', { type: 'button', class: 'main', id: 'link-write', onclick: () => attempt(async () => {
          await post('/api/link', { ...tried, base: bench.files['venue.yaml'].sha });
          tried = null;
          answer = null;
          await load();
        }) }, 'Write to venue.yaml'),
        make('button', { type: 'button', onclick: () => { tried = null; answer = null; showTray(); } }, 'Back to what is written')) : null,
      make('div', { class: 'row' }, make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('tables') }, 'Make the tables')),
      made.length ? sheet(['File', 'Bytes'], made.map((file) => [
        make('a', { href: '/api/artefact?' + new URLSearchParams({ name: file.name }), download: file.name }, file.name), String(file.bytes)]), [1])
        : make('p', { class: 'empty' }, 'No tables yet; they need the range curve, the colours and the mask.'),
    ];
  },
};
