// The cross: what a pointer does, done by keys. Arrows move it, Enter clicks, D takes hold and lets go.

import { tell } from "./bell.js";
import { blind } from "./blind.js";
import { byId } from "./elements.js";
import { hand } from "./hand.js";
import { ringAt } from "./hits.js";
import { pointAt } from "./pointer.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { clamp, follow, toPhotograph, toScreen, view } from "./view.js";

const [STEP, LONG_STEP] = [6, 48]; // screen pixels

/** Shows the cross, in the middle of what is seen where it is out of sight. */
function show() {
  const [sx, sy] = toScreen(hand.cross.x, hand.cross.y);
  if (!hand.cross.shown && (sx < 0 || sy < 0 || sx > view.width || sy > view.height)) {
    [hand.cross.x, hand.cross.y] = clamp(...toPhotograph(view.width / 2, view.height / 2));
  }
  hand.cross.shown = true;
}

/** The point of the screen and the place under the cross. */
function here() {
  return pointAt(...toScreen(hand.cross.x, hand.cross.y));
}

/** Moves the cross by steps. */
export function step(dx, dy, fast) {
  show();
  const length = (fast ? LONG_STEP : STEP) / view.scale;
  moveTo(...clamp(hand.cross.x + dx * length, hand.cross.y + dy * length));
}

/** Puts the cross on a place. */
export function moveTo(x, y) {
  Object.assign(hand.cross, { shown: true, x, y });
  follow(x, y);
  if (hand.drag) hand.drag.move(here());
  else hand.tool.hover?.(here());
  tell("pointer", here());
  tell("marks");
  tellUnder();
}

/** Says what lies under the cross. */
function tellUnder() {
  const { spots } = sheet;
  if (blind.on) return say(`${Math.round(hand.cross.x)}, ${Math.round(hand.cross.y)}.`);
  const row = ringAt(spots, hand.cross.x, hand.cross.y, 6 / view.scale);
  const place = `${Math.round(hand.cross.x)}, ${Math.round(hand.cross.y)}`;
  say(row < 0 ? `${place}: no ring.` : `${place}: ${describe(spots.at(row))}`);
}

/** Says what is known of a spot. */
export function describe(spot) {
  const doubt = spot.found ? `, doubt ${spot.doubt.toFixed(2)}` : ", placed by a person";
  const changed = { moved: ", moved", resized: ", resized" }[spot.changed] ?? "";
  return `${spot.counted ? "counted" : "struck"} spot${doubt}${changed}, ${width(spot)} wide.`;
}

/** Shows what is known of the spot under the pointer. */
export function showUnder(id) {
  const spot = id === null ? null : sheet.spots.get(id);
  byId("under").textContent = spot ? upper(describe(spot)) : "";
}

/** Begins a sentence with a capital. */
function upper(text) {
  return text.charAt(0).toUpperCase() + text.slice(1);
}

/** Says how wide a spot is. */
function width({ radius }) {
  return sheet.scale ? `${(2 * radius * sheet.scale.mm_per_px).toPrecision(3)} mm` : `${(2 * radius).toFixed(0)} pixels`;
}

/** Does at the cross what a click would do; lets go where something is held. */
export function press() {
  if (!hand.cross.shown) return show(), tellUnder(), tell("marks");
  if (hand.drag) return hold();
  hand.tool.click?.(here());
}

/** Takes hold of what lies under the cross, or lets go of it there. */
export function hold() {
  show();
  const { drag } = hand;
  hand.drag = drag ? null : hand.tool.grab?.(here()) ?? null;
  if (drag) drag.drop(here());
  else say(hand.drag ? "Held: move it with the arrow keys, then press D or Enter." : "Nothing here to hold.");
  tell("marks");
}
