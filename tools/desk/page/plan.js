// The floor from above, robot in the middle, forward up. Own coordinates: (-y, x) in metres.
import { ink, cross } from './view.js';

export function planBounds(desk) {
  const far = Math.max(1.2, Math.min(desk.bench.link.far_m, 4));
  return { x0: -far, x1: far, y0: -far, y1: far };
}

const own = (range, bearingDeg) => {
  const angle = bearingDeg * Math.PI / 180;
  return [-range * Math.sin(angle), range * Math.cos(angle)];
};

function rings(context, view, reachM) {
  const [cx, cy] = view.toScreen(0, 0);
  const reach = Math.hypot(view.canvas.clientWidth, view.canvas.clientHeight) / view.scale;
  const step = [0.1, 0.25, 0.5, 1, 2, 5].find((size) => size * view.scale > 46) || 10;
  context.lineWidth = 1;
  context.font = `11px ${getComputedStyle(document.body).fontFamily}`;
  for (let range = step; range < reach; range += step) {
    context.strokeStyle = ink('rule');
    context.beginPath();
    context.arc(cx, cy, range * view.scale, 0, 2 * Math.PI);
    context.stroke();
    context.fillStyle = ink('soft');
    context.fillText(`${+range.toFixed(2)} m`, cx + 3, cy - range * view.scale - 3);
  }
  context.strokeStyle = ink('rule');
  for (let bearing = 0; bearing < 360; bearing += 30) {
    const [x, y] = view.toScreen(...own(reach, bearing));
    context.beginPath();
    context.moveTo(cx, cy);
    context.lineTo(x, y);
    context.stroke();
  }
  if (reachM) {
    context.setLineDash([6, 4]);
    context.strokeStyle = ink('wait');
    context.beginPath();
    context.arc(cx, cy, reachM * view.scale, 0, 2 * Math.PI);
    context.stroke();
    context.setLineDash([]);
    context.fillStyle = ink('wait');
    context.fillText('reach', cx - 36, cy - reachM * view.scale - 3);
  }
}

function blind(context, view, zones) {
  if (!zones || !zones.length) return;
  context.fillStyle = ink('hidden');
  for (const zone of zones) {
    if (!(zone.to_m > zone.from_m)) continue;
    const half = zone.width_deg / 2 + 0.15;
    context.beginPath();
    const steps = [-half, -half / 2, 0, half / 2, half];
    for (const d of steps) context.lineTo(...view.toScreen(...own(zone.to_m, zone.bearing_deg + d)));
    for (const d of steps.reverse()) context.lineTo(...view.toScreen(...own(zone.from_m, zone.bearing_deg + d)));
    context.closePath();
    context.fill();
  }
}

function robot(context, view, radius) {
  const [cx, cy] = view.toScreen(0, 0);
  const size = Math.max(7, (radius || 0.09) * view.scale);
  context.fillStyle = ink('sheet');
  context.strokeStyle = ink('ink');
  context.lineWidth = 1.5;
  context.beginPath();
  context.arc(cx, cy, size, 0, 2 * Math.PI);
  context.fill();
  context.stroke();
  context.beginPath();
  context.moveTo(cx, cy - size);
  context.lineTo(cx, cy - size * 0.3);
  context.stroke();
}

export function drawPlan(context, view, desk) {
  const { bench } = desk;
  rings(context, view, desk.preview?.reach_m ?? bench.reach_m);
  blind(context, view, bench.blind_zone);
  robot(context, view, bench.rig.robot_radius_m);
  const places = desk.preview?.marks || bench.mark_places || [];
  for (const mark of bench.marks) {
    const bearing = mark.bearing_deg;
    const fitted = places.find((place) => place.line === mark.line);
    const flagged = (desk.preview?.flagged || bench.flagged).includes(mark.line);
    context.strokeStyle = flagged ? ink('bad') : ink('accent');
    context.lineWidth = desk.picked?.line === mark.line ? 3 : 1.5;
    const moved = desk.movedFloor?.line === mark.line ? desk.movedFloor : mark;
    if (bearing === null || bearing === undefined) {
      const [cx, cy] = view.toScreen(0, 0);
      context.globalAlpha = 0.6;
      context.beginPath();
      context.arc(cx, cy, moved.range_m * view.scale, 0, 2 * Math.PI);
      context.stroke();
      context.globalAlpha = 1;
      continue;
    }
    const [x, y] = view.toScreen(...own(moved.range_m, moved.bearing_deg));
    if (fitted && fitted.range_m !== undefined) {
      const [fx, fy] = view.toScreen(...own(fitted.range_m, fitted.bearing_deg));
      context.beginPath();
      context.moveTo(x, y);
      context.lineTo(fx, fy);
      context.stroke();
    }
    context.beginPath();
    context.arc(x, y, 5, 0, 2 * Math.PI);
    context.stroke();
  }
  if (desk.station === 'check' && desk.errors) {
    for (const row of desk.errors) {
      if (row.tape_range_m === undefined || row.range_m === undefined) continue;
      const [x, y] = view.toScreen(...own(row.tape_range_m, row.tape_bearing_deg ?? row.bearing_deg));
      const [fx, fy] = view.toScreen(...own(row.range_m, row.bearing_deg));
      context.strokeStyle = row.within ? ink('good') : ink('bad');
      context.lineWidth = 1.5;
      context.beginPath();
      context.moveTo(x, y);
      context.lineTo(fx, fy);
      context.stroke();
      context.beginPath();
      context.arc(fx, fy, 2.5, 0, 2 * Math.PI);
      context.stroke();
    }
  }
  if (desk.station === 'marks' && desk.advice) {
    context.strokeStyle = ink('wait');
    context.fillStyle = ink('wait');
    context.lineWidth = 2;
    desk.advice.forEach((spot, i) => {
      const [x, y] = view.toScreen(...own(spot.range_m, spot.bearing_deg));
      context.strokeRect(x - 6, y - 6, 12, 12);
      context.fillText(i ? `${i + 1}` : 'measure next', x + 10, y + 4);
    });
  }
  const p = desk.pointed;
  if (p && p.range_m !== undefined) {
    if (p.band95_m) {
      context.strokeStyle = ink('accent');
      context.lineWidth = 5;
      context.globalAlpha = 0.45;
      context.beginPath();
      context.moveTo(...view.toScreen(...own(p.band95_m[0], p.bearing_deg)));
      context.lineTo(...view.toScreen(...own(p.band95_m[1], p.bearing_deg)));
      context.stroke();
      context.globalAlpha = 1;
    }
    cross(context, ...view.toScreen(...own(p.range_m, p.bearing_deg)), ink('ink'), p.from === 'plan' ? 10 : 6);
  }
}
