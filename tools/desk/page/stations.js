// The stations of the path: what each shows in the tray and what the two views do while it is
// chosen. A station: {id, name, title, step | state(bench), tray(bench) -> elements, ringHelp,
// planHelp, onRing, onPlan, onRingDrag, onPlanDrag}. The views call what is there.
import { frames } from './station_frames.js';
import { centre } from './station_centre.js';
import { marks } from './station_marks.js';
import { colours } from './station_colours.js';
import { mask } from './station_mask.js';
import { tables } from './station_tables.js';
import { check } from './station_check.js';
import { files } from './station_files.js';

export const stations = [frames, centre, mask, marks, colours, tables, check, files];
