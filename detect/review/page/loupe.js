// The loupe: what lies under the pointer or the cross, larger, in the corner where it is not in the way.

import { on } from "./bell.js";
import { byId } from "./elements.js";
import { hand } from "./hand.js";
import { drawPhotograph } from "./photograph.js";
import { drawRings, rowsBy } from "./rings.js";
import { layers } from "./looks.js";
import { view } from "./view.js";

const SIDE = 190; // screen pixels
const [TIMES, LEAST] = [2.5, 2]; // as large as on the stage; screen pixels for one of the photograph

let at = null;
let frame = 0;

/** Shows or hides the loupe. */
export function toggle(shown = byId("loupe").hidden) {
  byId("loupe").hidden = !shown;
  byId("loupe-button").setAttribute("aria-pressed", String(shown));
  later();
}

/** Draws in the next frame. */
function later() {
  if (!frame && !byId("loupe").hidden) frame = requestAnimationFrame(drawLoupe);
}

/** Draws what is under the pointer. */
function drawLoupe() {
  frame = 0;
  const here = at ?? { x: view.x + view.width / 2 / view.scale, y: view.y + view.height / 2 / view.scale, sx: view.width / 2, sy: 0 };
  const scale = Math.max(TIMES * view.scale, LEAST);
  const seen = { scale, x: here.x - SIDE / 2 / scale, y: here.y - SIDE / 2 / scale, width: SIDE, height: SIDE, dpr: view.dpr };
  byId("loupe").dataset.side = here.sx > view.width - SIDE - 60 && here.sy < SIDE + 60 ? "left" : "right";
  const context = clean("loupe-photograph");
  drawPhotograph(context, seen);
  const rings = clean("loupe-rings");
  if (layers.rings) drawRings(rings, rowsBy(seen.x, seen.y, seen.x + SIDE / scale, seen.y + SIDE / scale, layers.struck), 0, seen);
  drawMiddle(rings);
}

/** Clears one layer of the loupe. */
function clean(id) {
  const canvas = byId(id);
  const side = Math.round(SIDE * view.dpr);
  if (canvas.width !== side) canvas.width = canvas.height = side;
  const context = canvas.getContext("2d");
  context.setTransform(view.dpr, 0, 0, view.dpr, 0, 0);
  context.clearRect(0, 0, SIDE, SIDE);
  return context;
}

/** Marks the middle. */
function drawMiddle(context) {
  context.strokeStyle = "rgba(255, 255, 255, 0.9)";
  context.lineWidth = 1;
  context.beginPath();
  for (const [i, j] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
    context.moveTo(SIDE / 2 + 3 * i, SIDE / 2 + 3 * j);
    context.lineTo(SIDE / 2 + 8 * i, SIDE / 2 + 8 * j);
  }
  context.stroke();
}

/** Begins. */
export function start() {
  byId("loupe-button").addEventListener("click", () => toggle());
  on("pointer", (point) => {
    at = point ?? (hand.cross.shown ? at : null);
    later();
  });
  for (const news of ["view", "spots", "photograph", "layers"]) on(news, later);
}
