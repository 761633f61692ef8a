// Frames: the three ways in, bringing images, and naming lights.
import { desk, attempt, edit, load, showFrame, say } from './desk.js';
import { get, post, upload } from './server.js';
import { make, field } from './html.js';

let light = '';
let watching = null;

async function bring(list) {
  const chosen = [...list];
  let taken = 0;
  for (const file of chosen) {
    const done = await attempt(() => upload('/api/frames', { light, name: file.name }, file));
    if (done) taken += 1;
  }
  say(`${taken} of ${chosen.length} frames taken${light ? ` into ${light}` : ''}`);
  await load();
}

function dropPlace() {
  const chooser = make('input', {
    type: 'file', multiple: true, id: 'frame-files', 'aria-label': 'Choose images',
    accept: '.png,.jpg,.jpeg,.bmp,.ppm,.565,.rgb565', onchange: (event) => bring(event.target.files),
  });
  const place = make('div', { class: 'drop' }, make('p', {}, 'Drop images here, or '), chooser);
  const folder = make('input', { type: 'file', webkitdirectory: true, id: 'frame-folder', 'aria-label': 'Choose a folder of images',
    onchange: (event) => bring([...event.target.files].filter((file) => /\.(png|jpe?g|bmp|ppm|pgm|565|rgb565)$/i.test(file.name))) });
  place.append(make('p', {}, 'or a whole folder: '), folder);
  place.addEventListener('dragover', (event) => { event.preventDefault(); place.classList.add('over'); });
  place.addEventListener('dragleave', () => place.classList.remove('over'));
  place.addEventListener('drop', (event) => {
    event.preventDefault();
    place.classList.remove('over');
    bring(event.dataTransfer.files);
  });
  return place;
}

// The laptop's own camera, where the mirror camera is plugged in as one; the picture stays here.
async function watch(video, button) {
  if (watching) {
    watching.getTracks().forEach((track) => track.stop());
    watching = null;
    video.hidden = true;
    button.textContent = 'Show camera';
    return;
  }
  await attempt(async () => {
    const { width_px: width, height_px: height } = desk.bench.rig;
    watching = await navigator.mediaDevices.getUserMedia({ video: { width, height } });
    video.srcObject = watching;
    video.hidden = false;
    await video.play();
    button.textContent = 'Stop camera';
  });
}

async function keep(video) {
  if (!watching) return;
  const canvas = make('canvas', { width: video.videoWidth, height: video.videoHeight });
  canvas.getContext('2d').drawImage(video, 0, 0);
  const blob = await new Promise((done) => canvas.toBlob(done, 'image/png'));
  const number = String(desk.bench.frames.length + 1).padStart(4, '0');
  await attempt(() => upload('/api/frames', { light, name: `${number}.png` }, blob));
  await load();
}

function waysIn() {
  const from = make('input', { id: 'from-venue', placeholder: 'folder of the old venue' });
  const batch = make('input', { id: 'batch-folder', placeholder: 'folder with frames/ and tape.csv' });
  return make('details', { id: 'ways' }, make('summary', {}, 'Three ways in'),
    make('p', {}, make('strong', {}, 'New venue: '), 'take frames here, measure 2–3 marks to verify the kept geometry, '
      + 'then choose colours and mask anew.'),
    make('p', {}, make('strong', {}, 'Mirror changed: '), 'put the new drawing into rig.yaml (station Files), add a '
      + 'handful of marks where "measure next" says, then compare with the old venue.'),
    make('div', { class: 'row' }, field('Compare with', from), make('button', {
      type: 'button', onclick: () => attempt(async () => {
        const answer = await get('/api/compare', { other: from.value });
        say(answer.summary);
      }),
    }, 'Compare')),
    make('p', {}, make('strong', {}, 'Batch check: '), 'hundreds of images and a tape sheet; a verdict, and the likely '
      + 'cause where it fails.'),
    make('div', { class: 'row' }, field('Check the folder', batch), make('button', {
      type: 'button', onclick: () => attempt(() => post('/api/run', { step: 'check', batch: batch.value })),
    }, 'Check')));
}

export const frames = {
  id: 'frames', name: 'Frames', title: 'Frames and lights',
  state: (bench) => (bench.frames.some((frame) => frame.problem) ? 'refused' : bench.frames.length ? 'fresh' : 'missing'),
  ringHelp: 'Drag to move, wheel or two fingers to zoom, 0 to see all.',
  tray(bench) {
    const lights = [...new Set(bench.frames.map((frame) => frame.light))].sort();
    const video = make('video', { hidden: true, muted: true, playsinline: true, style: 'width:100%' });
    const button = make('button', { type: 'button', id: 'camera', onclick: () => watch(video, button) }, 'Show camera');
    return [
      waysIn(),
      make('div', { class: 'row' }, field('Light these frames belong to', make('input', {
        id: 'light', value: light, placeholder: 'noon, dusk, lamps …', pattern: '[A-Za-z0-9_\\-]*', list: 'lights',
        oninput: (event) => { light = event.target.value.trim(); },
      })), make('datalist', { id: 'lights' }, ...lights.map((name) => make('option', { value: name })))),
      dropPlace(),
      make('p', { class: 'care' }, 'Wheels off the floor, or motor and kicker power cut, while frames are taken. No sun into the mirror; lamps and LED rings dazzle.'),
      make('div', { class: 'row' }, button, make('button', { type: 'button', onclick: () => keep(video) }, 'Keep this picture')),
      video,
      ...lights.flatMap((name) => [
        make('h3', {}, name || 'no light named'),
        make('div', { class: 'shots' }, ...bench.frames.filter((frame) => frame.light === name).map((frame) =>
          make('div', {}, make('button', { type: 'button', onclick: () => showFrame(frame.image), 'aria-label': `Show ${frame.image}` },
            frame.problem ? null : make('img', { src: '/api/frame?' + new URLSearchParams({ image: frame.image }), alt: '', loading: 'lazy' }),
            frame.image.split('/').pop()),
            frame.problem ? make('p', { class: 's-refused' }, frame.problem) : null))),
      ]),
      bench.frames.length ? make('div', { class: 'row' }, make('button', {
        type: 'button', onclick: () => edit({ kind: 'frame-remove', file: desk.image }),
      }, 'Remove the shown frame')) : make('p', { class: 'empty' },
        'No frames yet. Take a dozen in each light and turn the robot between them.'),
    ];
  },
};
