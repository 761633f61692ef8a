// Check: the verdict, and where the errors are.
import { desk, run, showFrame, redraw, showTray } from './desk.js';
import { make, facts, sheet, metres, degrees, percent } from './html.js';

let order = 'worst';

export const check = {
  id: 'check', name: 'Check', title: 'Verdict', step: 'check',
  planHelp: 'Lines run from where the tape says to where the board would have said.',
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'check');
    const c = bench.check;
    const rows = [...(bench.check_rows || [])];
    if (order === 'worst') rows.sort((a, b) => (b.error_share ?? 9) - (a.error_share ?? 9));
    desk.errors = rows;
    return [
      make('div', { class: 'row' },
        make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('check') }, 'Check'),
        make('a', { href: '/api/report', target: '_blank', rel: 'noopener' }, 'Open the report')),
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      c ? make('p', { class: c.accepted ? 's-fresh' : 's-refused' }, make('strong', {}, c.accepted ? 'Accepted' : 'Not accepted')) : null,
      c && c.reasons.length ? make('ul', { class: 'problems' }, ...c.reasons.map((reason) => make('li', {}, reason))) : null,
      c ? facts([['Rows', String(c.rows)], ['Found', percent(c.recall)], ['Range error', `${percent(c.range_rms_relative)} RMS, bias ${(1000 * c.range_bias_m).toFixed(0)} mm`],
        ['95 % within', percent(c.range_p95_relative)], ['Bearing', degrees(c.bearing_rms_deg) + ' RMS']]) : make('p', { class: 'empty' },
        'Not checked yet. It needs tables and a tape sheet: tape.csv with image, object, range and bearing.'),
      ...(c?.causes || []).map((cause) => make('div', {}, make('h3', {}, cause.cause), make('p', {}, cause.evidence), make('p', {}, cause.advice))),
      rows.length ? make('label', { class: 'inline' }, make('input', { type: 'checkbox', checked: order === 'worst', onchange: (event) => {
        order = event.target.checked ? 'worst' : 'file';
        showTray();
      } }), 'worst first') : null,
      rows.length ? sheet(['Image', 'Object', 'Tape', 'Said', ''], rows.slice(0, 200).map((row) => [
        row.image.replace(/^frames\//, ''), row.object, metres(row.tape_range_m), row.range_m === undefined ? 'not found' : metres(row.range_m),
        make('button', { type: 'button', 'aria-label': `Show ${row.image}`, onclick: () => { showFrame(row.image); redraw(); } }, 'show')]), [2, 3],
      (r) => (rows[r].within === false ? 'flagged' : '')) : null,
    ];
  },
};
