// What changes with every movement of the hand, on top of everything: chosen ring, handle, cross, what a tool draws.

import { hand } from "./hand.js";
import { layers } from "./looks.js";
import { drawRing } from "./rings.js";
import { sheet } from "./sheet.js";
import { toScreen, view } from "./view.js";

/** The chosen spot, the one under the pointer, rings not yet saved, and rings that the slider would strike. */
export const marks = { chosen: null, hovered: null, ghosts: [], preview: [] };

const HANDLE = 9; // screen pixels from the ring to the middle of its handle

/** Returns where the handle of a spot is on the screen. */
export function handleAt(spot) {
  const [sx, sy] = toScreen(spot.x, spot.y);
  return [sx + Math.max(spot.radius * view.scale, 2.5) + HANDLE, sy];
}

/** Returns the spot whose handle is at a point of the screen, or null. */
export function handleUnder(sx, sy, reach) {
  for (const id of [marks.hovered, marks.chosen]) {
    const spot = id === null ? null : sheet.spots.get(id);
    if (!spot?.counted) continue;
    const [hx, hy] = handleAt(spot);
    if (Math.hypot(hx - sx, hy - sy) <= reach) return spot;
  }
  return null;
}

/** Whether there is anything to draw on this layer. */
export function anyMarks() {
  const { preview, ghosts, hovered, chosen } = marks;
  return hand.cross.shown || (layers.rings && (preview.length || ghosts.length || hovered !== null || chosen !== null || Boolean(hand.tool?.draw)));
}

/** Draws everything of this layer. */
export function drawMarks(context) {
  if (layers.rings) {
    for (const row of marks.preview) drawPreview(context, row);
    for (const { x, y, radius } of marks.ghosts) drawRing(context, 1, ...toScreen(x, y), radius * view.scale);
    for (const id of new Set([marks.hovered, marks.chosen])) drawChosen(context, id);
    hand.tool?.draw?.(context);
  }
  if (hand.cross.shown) drawCross(context);
}

/** Marks the chosen spot by four corners, and shows its handle. */
function drawChosen(context, id) {
  const spot = id === null ? null : sheet.spots.get(id);
  if (!spot) return;
  const [sx, sy] = toScreen(spot.x, spot.y);
  const r = Math.max(spot.radius * view.scale, 2.5);
  if (id === marks.chosen) lined(context, corners(sx, sy, r + 6), "#ffffff", 2);
  if (spot.counted && hand.tool?.handles) {
    const [hx, hy] = handleAt(spot);
    const path = new Path2D();
    path.rect(hx - 4, hy - 4, 8, 8);
    lined(context, path, "#ffffff", 1.5);
    context.fillStyle = "#17384a";
    context.fill(path);
  }
}

/** Four corners around a point. */
function corners(x, y, half) {
  const path = new Path2D();
  const arm = Math.max(4, half * 0.35);
  for (const [i, j] of [[-1, -1], [1, -1], [1, 1], [-1, 1]]) {
    path.moveTo(x + i * half, y + j * (half - arm));
    path.lineTo(x + i * half, y + j * half);
    path.lineTo(x + i * (half - arm), y + j * half);
  }
  return path;
}

/** Crosses out a ring that would be struck. */
function drawPreview(context, row) {
  const { spots } = sheet;
  const [sx, sy] = toScreen(spots.x[row], spots.y[row]);
  if (sx < -30 || sy < -30 || sx > view.width + 30 || sy > view.height + 30) return;
  const arm = Math.max(5, spots.radius[row] * view.scale * 0.75);
  const path = new Path2D();
  path.moveTo(sx - arm, sy - arm);
  path.lineTo(sx + arm, sy + arm);
  path.moveTo(sx - arm, sy + arm);
  path.lineTo(sx + arm, sy - arm);
  lined(context, path, "#ff8fb2", 2.2);
}

/** Draws the cross that the arrow keys move. */
function drawCross(context) {
  const [sx, sy] = toScreen(hand.cross.x, hand.cross.y).map((value) => Math.round(value) + 0.5);
  const path = new Path2D();
  for (const [i, j] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
    path.moveTo(sx + 4 * i, sy + 4 * j);
    path.lineTo(sx + 16 * i, sy + 16 * j);
  }
  lined(context, path, hand.drag ? "#ffe45c" : "#ffffff", 2);
}

/** Strokes a path with a dark halo. */
export function lined(context, path, colour, width, dash = []) {
  context.lineCap = "round";
  context.strokeStyle = "rgba(8, 13, 18, 0.8)";
  context.lineWidth = width + 2.4;
  context.stroke(path);
  context.setLineDash(dash);
  context.strokeStyle = colour;
  context.lineWidth = width;
  context.stroke(path);
  context.setLineDash([]);
}
