// The ring image and everything that lies on it, in pixel coordinates.
import { ink, cross } from './view.js';

function ellipse(context, view, centre, rim) {
  const [x, y] = view.toScreen(centre.u_px, centre.v_px);
  context.beginPath();
  context.ellipse(x, y, rim.a_px * view.scale, rim.b_px * view.scale, rim.angle_deg * Math.PI / 180, 0, 2 * Math.PI);
}

// What a swatch's or stroke's points draw; `points` is the file's own text.
function shape(context, view, kind, points) {
  const n = points.split(/\s+/).map(Number);
  context.beginPath();
  if (kind === 'disc') {
    context.arc(...view.toScreen(n[0], n[1]), n[2] * view.scale, 0, 2 * Math.PI);
  } else if (kind === 'box') {
    const [x0, y0] = view.toScreen(n[0], n[1]);
    const [x1, y1] = view.toScreen(n[2], n[3]);
    context.rect(x0, y0, x1 - x0, y1 - y0);
  } else if (kind === 'grow') {
    context.arc(...view.toScreen(n[0], n[1]), 5, 0, 2 * Math.PI);
  } else {
    for (let i = 0; i + 1 < n.length; i += 2) {
      const [x, y] = view.toScreen(n[i], n[i + 1]);
      if (i) context.lineTo(x, y);
      else context.moveTo(x, y);
    }
    if (kind === 'polygon') context.closePath();
  }
}

export function drawRing(context, view, desk) {
  const { bench, layers } = desk;
  const width = bench.rig.width_px;
  const height = bench.rig.height_px;
  const [left, top] = view.toScreen(-0.5, -0.5);
  const place = [left, top, width * view.scale, height * view.scale];
  context.imageSmoothingEnabled = view.scale < 3;
  if (desk.picture) {
    context.drawImage(desk.picture, ...place);
  } else {
    context.fillStyle = ink('soft');
    context.font = `1rem ${getComputedStyle(document.body).fontFamily}`;
    context.textAlign = 'center';
    const bad = bench.frames.find((frame) => frame.image === desk.image)?.problem;
    context.fillText(bad ? `This frame ${bad}` : bench.frames.length ? 'Choose a frame' : 'No frames yet: add some in the tray',
      view.canvas.clientWidth / 2, view.canvas.clientHeight / 2);
    context.textAlign = 'start';
  }
  if (layers.classes && desk.classPicture) context.drawImage(desk.classPicture, ...place);
  if (layers.mask && desk.maskPicture) context.drawImage(desk.maskPicture, ...place);
  const outline = (colour, dash = []) => {
    context.setLineDash([]);
    context.strokeStyle = ink('sheet');
    context.lineWidth = 3.5;
    context.stroke();
    context.setLineDash(dash);
    context.strokeStyle = colour;
    context.lineWidth = 1.6;
    context.stroke();
    context.setLineDash([]);
  };
  if (layers.rim && bench.centre) {
    if (bench.centre.rim) {
      ellipse(context, view, bench.centre.centre, bench.centre.rim);
      outline(ink('accent'));
    }
    cross(context, ...view.toScreen(bench.centre.centre.u_px, bench.centre.centre.v_px), ink('accent'), 9);
  }
  if (layers.swatches) {
    for (const swatch of bench.swatches) {
      if (swatch.image !== desk.image) continue;
      shape(context, view, swatch.shape, swatch.points);
      outline(swatch.label === 'surroundings' ? ink('soft') : ink('wait'));
    }
    if (desk.station === 'mask') {
      for (const stroke of bench.strokes) {
        shape(context, view, 'line', stroke.points);
        outline(stroke.kind === 'hide' ? ink('bad') : ink('good'), [5, 3]);
      }
    }
  }
  if (desk.draft) {
    shape(context, view, desk.draft.shape, desk.draft.points);
    outline(ink('accent'), [4, 3]);
  }
  if (layers.marks) {
    const marks = desk.movedMark ? bench.marks.map((m) => (m.line === desk.movedMark.line ? desk.movedMark : m)) : bench.marks;
    for (const mark of marks) {
      const other = mark.image && mark.image !== desk.image;
      const [x, y] = view.toScreen(mark.u_px, mark.v_px);
      const flagged = (desk.preview?.flagged || bench.flagged).includes(mark.line);
      context.beginPath();
      context.arc(x, y, desk.picked?.line === mark.line ? 8 : 5, 0, 2 * Math.PI);
      context.globalAlpha = other ? 0.55 : 1;
      outline(flagged ? ink('bad') : ink('accent'));
      context.globalAlpha = 1;
    }
  }
  if (desk.station === 'marks' && desk.advice) {
    for (const spot of desk.advice) {
      if (spot.u_px === undefined) continue;
      const [x, y] = view.toScreen(spot.u_px, spot.v_px);
      context.beginPath();
      context.rect(x - 6, y - 6, 12, 12);
      outline(ink('wait'));
    }
  }
  if (desk.station === 'check' && desk.errors) {
    for (const row of desk.errors) {
      if (row.image !== desk.image || row.u_px === undefined) continue;
      context.beginPath();
      context.arc(...view.toScreen(row.u_px, row.v_px), 8, 0, 2 * Math.PI);
      outline(ink(row.within === false ? 'bad' : 'good'));
    }
  }
  if (desk.pointed && desk.pointed.u_px !== undefined) {
    cross(context, ...view.toScreen(desk.pointed.u_px, desk.pointed.v_px), ink('ink'), desk.pointed.from === 'ring' ? 10 : 6);
  }
}
