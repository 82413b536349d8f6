// What the hand does on the stage: a click, a drag, a shift of the photograph, a pinch, the wheel.

import { tell } from "./bell.js";
import { byId } from "./elements.js";
import { hand, letGo } from "./hand.js";
import { marks } from "./marks.js";
import { pan, toPhotograph, view, zoom } from "./view.js";

const FAR = 4; // screen pixels that make a drag of a click, whatever time it takes
const SLOP = { mouse: 6, pen: 8, touch: 14 }; // screen pixels by which a ring may be missed

const down = new Map(); // pointers that touch the stage
let press = null; // the press that may become a click or a drag
let pinch = null; // middle and width of two fingers

/** Returns a point of the screen with the place of the photograph under it. */
export function pointAt(sx, sy, slop = SLOP.mouse) {
  const [x, y] = toPhotograph(sx, sy);
  return { sx, sy, x, y, slop: slop / view.scale, reach: slop + 2 };
}

/** Returns where an event is on the stage. */
function point(event) {
  const box = byId("stage").getBoundingClientRect();
  return pointAt(event.clientX - box.left, event.clientY - box.top, SLOP[event.pointerType] ?? SLOP.mouse);
}

/** A pointer goes down. */
function pressed(event) {
  byId("stage").setPointerCapture(event.pointerId);
  const at = point(event);
  down.set(event.pointerId, at);
  hand.cross.shown = false;
  if (down.size === 2) return beginPinch();
  if (down.size > 2) return;
  press = { at, last: at, moved: false, shifts: event.button !== 0 || event.shiftKey };
}

/** A pointer moves. */
function moved(event) {
  const at = point(event);
  if (down.has(event.pointerId)) down.set(event.pointerId, at);
  if (pinch) return goOnPinching();
  if (!press) return hovered(at, event);
  if (!press.moved) begin(at);
  if (!press.moved) return;
  if (hand.drag) hand.drag.move(at);
  else pan(at.sx - press.last.sx, at.sy - press.last.sy);
  press.last = at;
}

/** Begins a drag once the pointer is far enough from where it went down. */
function begin(at) {
  if (Math.hypot(at.sx - press.at.sx, at.sy - press.at.sy) < FAR) return;
  press.moved = true;
  hand.drag = press.shifts ? null : hand.tool?.grab?.(press.at) ?? null;
  byId("stage").dataset.hand = hand.drag ? "holds" : "shifts";
}

/** A pointer goes up. */
function released(event) {
  down.delete(event.pointerId);
  if (pinch) {
    if (!down.size) pinch = null;
    return;
  }
  if (!press) return;
  const { drag } = hand;
  hand.drag = null;
  if (drag) drag.drop(point(event));
  else if (!press.moved && !press.shifts) hand.tool?.click?.(press.at);
  press = null;
  delete byId("stage").dataset.hand;
  tell("marks");
}

/** A pointer is taken away by the system: nothing is done. */
function cancelled(event) {
  down.delete(event.pointerId);
  if (!down.size) pinch = null;
  press = null;
  letGo();
  delete byId("stage").dataset.hand;
  tell("marks");
}

/** The pointer passes over the stage without touching. */
function hovered(at, event) {
  if (event.pointerType === "touch") return;
  hand.tool?.hover?.(at);
  tell("pointer", at);
}

/** Two fingers touch: they shift and stretch the photograph, whatever one of them had begun. */
function beginPinch() {
  letGo();
  press = null;
  pinch = measure();
}

/** The middle of two fingers and how far they are apart. */
function measure() {
  const [a, b] = [...down.values()];
  return { sx: (a.sx + b.sx) / 2, sy: (a.sy + b.sy) / 2, width: Math.hypot(a.sx - b.sx, a.sy - b.sy) };
}

/** Two fingers move. */
function goOnPinching() {
  if (down.size !== 2) return;
  const now = measure();
  pan(now.sx - pinch.sx, now.sy - pinch.sy);
  if (pinch.width > 0 && now.width > 0) zoom(now.width / pinch.width, now.sx, now.sy);
  pinch = now;
}

/** The wheel turns. */
function turned(event) {
  event.preventDefault();
  const unit = event.deltaMode === 1 ? 30 : 1;
  if (event.shiftKey) return pan(-unit * (event.deltaX || event.deltaY), 0);
  const { sx, sy } = point(event);
  const speed = event.ctrlKey ? 0.012 : 0.0016;
  zoom(Math.exp(-speed * Math.max(-300, Math.min(300, unit * event.deltaY))), sx, sy);
}

/** The pointer leaves the stage. */
function left() {
  if (press) return;
  marks.hovered = null;
  tell("hovered", null);
  tell("pointer", null);
  tell("marks");
}

/** Begins. */
export function start() {
  const stage = byId("stage");
  stage.addEventListener("pointerdown", pressed);
  stage.addEventListener("pointermove", moved);
  stage.addEventListener("pointerup", released);
  stage.addEventListener("pointercancel", cancelled);
  stage.addEventListener("pointerleave", left);
  stage.addEventListener("wheel", turned, { passive: false });
  stage.addEventListener("contextmenu", (event) => event.preventDefault());
}
