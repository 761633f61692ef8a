import { run } from './desk.js';
import { make, facts } from './html.js';

export const centre = {
  id: 'centre', name: 'Centre', title: 'Rim and centre', step: 'centre',
  ringHelp: 'The line should lie on the mirror’s edge all around, where it can be seen.',
  tray(bench) {
    const step = bench.steps.find((one) => one.name === 'centre');
    const c = bench.centre;
    return [
      step.problem ? make('ul', { class: 'problems' }, ...step.problem.split('\n').map((line) => make('li', {}, line))) : null,
      c ? facts([
        ['Centre', `${c.centre.u_px.toFixed(2)}, ${c.centre.v_px.toFixed(2)} px ± ${c.centre.sd_px.toFixed(2)} px`],
        ['Rim', c.rim ? `${c.rim.a_px.toFixed(1)} × ${c.rim.b_px.toFixed(1)} px (semi-axes)` : 'not given'],
        ['Frames used', String(c.frames_used)],
      ]) : make('p', { class: 'empty' }, 'The centre has not been found yet.'),
      c && c.frames_disagree ? make('p', { class: 's-refused' }, 'The frames disagree: the mirror moved while they were taken.') : null,
      make('button', { type: 'button', class: step.state === 'fresh' ? '' : 'main', onclick: () => run('centre') }, 'Find the centre'),
    ];
  },
};
