// Files: what people write, as text, checked as it is typed, saved only when it holds.
import { desk, attempt, load, showTray } from './desk.js';
import { post, newestOnly } from './server.js';
import { make } from './html.js';

let shown = 'venue.yaml';
const drafts = {};    // file -> {base, text}; kept in the browser too, so that nothing typed is lost
let problems = [];

// What an empty sheet begins with.
const headers = {
  'marks.csv': 'image,u_px,v_px,object,range_m,bearing_deg\n', 'swatches.csv': 'image,label,shape,points\n',
  'strokes.csv': 'kind,width_px,points\n', 'tape.csv': 'image,object,range_m,bearing_deg\n',
};

const key = (file) => `rondel:${desk.bench.folder}:${file}`;

const examine = newestOnly((draft) => post('/api/examine', draft), (answer) => {
  problems = answer ? answer.problems : problems;
  const list = document.getElementById('file-problems');
  if (list) list.replaceChildren(...problems.map((line) => make('li', {}, line)));
  const save = document.getElementById('file-save');
  if (save) save.disabled = problems.length > 0;
});

export const files = {
  id: 'files', name: 'Files', title: 'The venue’s own files',
  state: (bench) => (bench.problems.length ? 'refused' : 'fresh'),
  tray(bench) {
    const file = bench.files[shown];
    const kept = drafts[shown] || JSON.parse(localStorage.getItem(key(shown)) || 'null');
    const text = kept ? kept.text : file.text || headers[shown] || '';
    const area = make('textarea', { id: 'file-text', 'aria-label': shown, spellcheck: 'false', value: text, oninput: (event) => {
      drafts[shown] = { file: shown, base: kept ? kept.base : file.sha, text: event.target.value };
      localStorage.setItem(key(shown), JSON.stringify(drafts[shown]));
      examine(drafts[shown]);
    } });
    const forget = () => {
      delete drafts[shown];
      localStorage.removeItem(key(shown));
      problems = [];
    };
    return [
      make('div', { class: 'row' }, ...Object.keys(bench.files).map((name) => make('button', {
        type: 'button', 'aria-pressed': String(shown === name), onclick: () => { shown = name; problems = []; showTray(); },
      }, name))),
      kept && kept.base !== file.sha ? make('p', { class: 's-refused' }, 'The file was changed elsewhere since you began typing; drop the draft, or copy what you need.') : null,
      area,
      make('ul', { class: 'problems', id: 'file-problems' }, ...(kept ? problems : bench.problems).map((line) => make('li', {}, line))),
      make('div', { class: 'row' },
        make('button', { type: 'button', class: 'main', id: 'file-save', onclick: () => attempt(async () => {
          await post('/api/edit', { kind: 'text', ...(drafts[shown] || kept || { file: shown, base: file.sha, text }) });
          forget();
          await load();
        }) }, 'Save'),
        make('button', { type: 'button', onclick: () => { forget(); showTray(); } }, 'Drop the draft')),
    ];
  },
};
