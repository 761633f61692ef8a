// Files: venue.yaml and rig.yaml as text, checked as they are typed, saved only when they hold.
import { desk, attempt, load, showTray } from './desk.js';
import { post, newestOnly } from './server.js';
import { make } from './html.js';

let shown = 'venue.yaml';
const drafts = {};    // file -> {base, text}; kept in the browser too, so that nothing typed is lost
let problems = [];

const key = (file) => `rondel:${desk.bench.folder}:${file}`;

const examine = newestOnly((draft) => post('/api/examine', draft), (answer) => {
  problems = answer ? answer.problems : problems;
  const list = document.getElementById('file-problems');
  if (list) list.replaceChildren(...problems.map((line) => make('li', {}, line)));
  const save = document.getElementById('file-save');
  if (save) save.disabled = problems.length > 0;
});

export const files = {
  id: 'files', name: 'Files', title: 'venue.yaml and rig.yaml',
  state: (bench) => (bench.problems.length ? 'refused' : 'fresh'),
  tray(bench) {
    const file = bench.files[shown];
    const kept = drafts[shown] || JSON.parse(localStorage.getItem(key(shown)) || 'null');
    const text = kept ? kept.text : file.text;
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
          await post('/api/edit', { kind: 'text', ...(drafts[shown] || kept) });
          forget();
          await load();
        }) }, 'Save'),
        make('button', { type: 'button', onclick: () => { forget(); showTray(); } }, 'Drop the draft')),
    ];
  },
};
