// The stage: layers on top of each other, each drawn anew only when it must be.

import { on } from "./bell.js";
import { byId } from "./elements.js";
import { drawGround } from "./ground.js";
import { anyMarks, drawMarks } from "./marks.js";
import { drawPhotograph } from "./photograph.js";
import { drawRings, rowsBy } from "./rings.js";
import { layers } from "./looks.js";
import { sheet } from "./sheet.js";
import { resize, view } from "./view.js";

const FEW = 1200; // rings that are drawn anew in every frame; more are shifted as a picture
const SLICE = 1500; // rings in one frame, so that the page can do something else in between
const STILL = 90; // milliseconds without a movement, after which many rings are drawn anew

const canvases = Object.fromEntries(["photograph", "ground", "rings", "marks"].map((name) => [name, byId(`layer-${name}`)]));
const contexts = Object.fromEntries(Object.entries(canvases).map(([name, canvas]) => [name, canvas.getContext("2d")]));
const back = { canvas: byId("layer-rings-back"), context: byId("layer-rings-back").getContext("2d") };
const stale = { photograph: true, ground: true, rings: true, marks: true };
const shown = { ground: null, rings: null }; // the view that a layer was drawn for
let [frame, job, lastMove, stillTimer, marked] = [0, null, 0, 0, false];

/** Asks for layers to be drawn anew in the next frame. */
export function redraw(...names) {
  for (const name of names) stale[name] = true;
  if (!frame) frame = requestAnimationFrame(drawFrame);
}

/** Fits the layers to the size of the stage. */
function fit() {
  const { clientWidth: width, clientHeight: height } = byId("stage");
  if (!width || !height) return;
  const dpr = Math.min(devicePixelRatio || 1, 2);
  for (const canvas of [...Object.values(canvases), back.canvas]) {
    canvas.width = Math.round(width * dpr);
    canvas.height = Math.round(height * dpr);
  }
  resize(width, height, dpr);
  [shown.ground, shown.rings, job] = [null, null, null];
  redraw("photograph", "ground", "rings", "marks");
}

/** Draws whatever is stale. */
function drawFrame() {
  frame = 0;
  if (stale.photograph) byId("stage").dataset.tiles = clean("photograph", drawPhotograph) ? "some" : "all";
  if (stale.ground) clean("ground", drawGround), (shown.ground = { ...view }), place(canvases.ground, view);
  if (stale.rings) startRings();
  if (job) goOn();
  if (stale.marks && (anyMarks() || marked)) clean("marks", drawMarks), (marked = anyMarks());
  Object.assign(stale, { photograph: false, ground: false, rings: false, marks: false });
}

/** Clears a layer and draws it; returns what its drawing does. */
function clean(name, draw) {
  const context = contexts[name];
  context.setTransform(view.dpr, 0, 0, view.dpr, 0, 0);
  context.clearRect(0, 0, view.width, view.height);
  return draw(context);
}

/** Begins to draw all rings in sight on the layer that is not seen. */
function startRings() {
  const seen = { ...view };
  sheet.spots.drawn.clear();
  const rows = layers.rings ? rowsBy(seen.x, seen.y, seen.x + seen.width / seen.scale, seen.y + seen.height / seen.scale, layers.struck) : [];
  back.context.setTransform(seen.dpr, 0, 0, seen.dpr, 0, 0);
  back.context.clearRect(0, 0, seen.width, seen.height);
  job = { seen, rows, next: 0 };
}

/** Draws some more rings; when all are there, the two layers change places. */
function goOn() {
  job.next = drawRings(back.context, job.rows, job.next, job.seen, job.next + SLICE);
  if (job.next < job.rows.length) {
    if (!frame) frame = requestAnimationFrame(drawFrame);
    return;
  }
  shown.rings = job.seen;
  shown.many = job.rows.length;
  job = null;
  [canvases.rings, back.canvas] = [back.canvas, canvases.rings];
  [contexts.rings, back.context] = [back.context, contexts.rings];
  canvases.rings.hidden = false;
  back.canvas.hidden = true;
  place(canvases.rings, shown.rings);
  byId("stage").dataset.drawn = Number(byId("stage").dataset.drawn ?? 0) + 1;
}

/** Shifts and stretches a layer drawn for one view to where it belongs in the present one. */
function place(canvas, { x, y, scale }) {
  const factor = view.scale / scale;
  const [dx, dy] = [(x - view.x) * view.scale, (y - view.y) * view.scale];
  const still = factor === 1 && dx === 0 && dy === 0;
  canvas.style.transform = still ? "none" : `translate(${dx}px, ${dy}px) scale(${factor})`;
}

/** Follows a movement of the view: few rings are drawn anew, many are shifted until it is still. */
function moved() {
  lastMove = performance.now();
  byId("stage").dataset.tiles = "some";
  redraw("photograph", "marks");
  if (!shown.rings || (shown.many ?? 0) <= FEW) return redraw("ground", "rings");
  job = null;
  place(canvases.rings, shown.rings);
  if (shown.ground) place(canvases.ground, shown.ground);
  if (!stillTimer) stillTimer = setTimeout(whenStill, STILL);
}

/** Draws many rings anew once the view is still. */
function whenStill() {
  stillTimer = 0;
  const left = STILL - (performance.now() - lastMove);
  if (left > 1) stillTimer = setTimeout(whenStill, left);
  else redraw("ground", "rings");
}

/** Draws anew only where some spots are or were. */
function patch(ids) {
  if (ids === null || ids.length > 40 || job || stillTimer || !shown.rings) return redraw("rings", "marks");
  for (const id of ids) {
    const spot = sheet.spots.get(id);
    const before = sheet.spots.drawn.get(id);
    sheet.spots.drawn.delete(id);
    if (before) patchAround(before);
    if (spot) patchAround(spot);
  }
  byId("stage").dataset.drawn = Number(byId("stage").dataset.drawn ?? 0) + 1;
  redraw("marks");
}

/** Draws the rings anew in the square around one place. */
function patchAround({ x, y, radius }) {
  const { context, seen } = { context: contexts.rings, seen: shown.rings };
  const reach = radius + 16 / seen.scale;
  context.save();
  context.setTransform(seen.dpr, 0, 0, seen.dpr, 0, 0);
  context.beginPath();
  context.rect((x - reach - seen.x) * seen.scale, (y - reach - seen.y) * seen.scale, 2 * reach * seen.scale, 2 * reach * seen.scale);
  context.clip();
  context.clearRect(0, 0, seen.width, seen.height);
  if (layers.rings) drawRings(context, rowsBy(x - reach, y - reach, x + reach, y + reach, layers.struck), 0, seen);
  context.restore();
}

/** Begins: the layers follow the size of the stage and all that happens. */
export function start() {
  new ResizeObserver(fit).observe(byId("stage"));
  fit();
  on("view", moved);
  on("photograph", () => redraw("photograph", "marks"));
  on("spots", patch);
  on("area", () => redraw("ground", "marks"));
  on("quadrats", () => layers.grid && redraw("ground"));
  on("layers", () => redraw("ground", "rings", "marks"));
  on("marks", () => redraw("marks"));
  on("opened", () => { shown.rings = null; redraw("photograph", "ground", "rings", "marks"); });
}
