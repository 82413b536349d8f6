// Which part of the photograph is seen, and how large.

import { tell } from "./bell.js";

const LARGEST = 48; // screen pixels for one pixel of the photograph
const EDGE = 40; // screen pixels of the photograph that always stay in sight

/** Scale in screen pixels per pixel of the photograph; x, y: the place at the stage's top left. */
export const view = { scale: 1, x: 0, y: 0, width: 1, height: 1, dpr: 1 };

const picture = { width: 1, height: 1 };

/** Says how large the stage is. */
export function resize(width, height, dpr) {
  const whole = isWhole();
  Object.assign(view, { width, height, dpr });
  if (whole) showWhole();
  else settle();
}

/** Says how large the photograph is, and shows all of it. */
export function setPicture(width, height) {
  Object.assign(picture, { width, height });
  showWhole();
}

/** The scale at which the whole photograph fits. */
function wholeScale() {
  return 0.97 * Math.min(view.width / picture.width, view.height / picture.height);
}

/** Whether the whole photograph is shown, as at first. */
function isWhole() {
  return Math.abs(view.scale / wholeScale() - 1) < 1e-6;
}

/** Shows the whole photograph. */
export function showWhole() {
  view.scale = wholeScale();
  view.x = picture.width / 2 - 0.5 - view.width / view.scale / 2;
  view.y = picture.height / 2 - 0.5 - view.height / view.scale / 2;
  tell("view");
}

/** Makes the photograph larger or smaller; the place under a point of the screen stays there. */
export function zoom(factor, sx = view.width / 2, sy = view.height / 2) {
  const scale = Math.min(LARGEST, Math.max(0.5 * wholeScale(), view.scale * factor));
  view.x += sx / view.scale - sx / scale;
  view.y += sy / view.scale - sy / scale;
  view.scale = scale;
  settle();
}

/** Shifts the photograph by screen pixels. */
export function pan(dx, dy) {
  view.x -= dx / view.scale;
  view.y -= dy / view.scale;
  settle();
}

/** Keeps some of the photograph in sight. */
function settle() {
  const edge = EDGE / view.scale;
  view.x = Math.min(Math.max(view.x, edge - view.width / view.scale), picture.width - edge);
  view.y = Math.min(Math.max(view.y, edge - view.height / view.scale), picture.height - edge);
  tell("view");
}

/** Brings a place into sight; `scale`, where given, is the least at which it is shown. */
export function look(x, y, scale = 0) {
  if (view.scale < scale) view.scale = Math.min(LARGEST, scale);
  view.x = x - view.width / view.scale / 2;
  view.y = y - view.height / view.scale / 2;
  settle();
}

/** Shifts the photograph no more than needed for a place to be well inside the stage. */
export function follow(x, y) {
  const [sx, sy] = toScreen(x, y);
  const margin = Math.min(60, view.width / 5, view.height / 5);
  const dx = Math.max(0, margin - sx) - Math.max(0, sx - view.width + margin);
  const dy = Math.max(0, margin - sy) - Math.max(0, sy - view.height + margin);
  if (dx || dy) pan(dx, dy);
}

/** Returns where a place of the photograph is on the stage. */
export function toScreen(x, y) {
  return [(x - view.x) * view.scale, (y - view.y) * view.scale];
}

/** Returns which place of the photograph is at a point of the stage. */
export function toPhotograph(sx, sy) {
  return [view.x + sx / view.scale, view.y + sy / view.scale];
}

/** Keeps a place within the photograph. */
export function clamp(x, y) {
  return [Math.min(Math.max(x, -0.5), picture.width - 0.5), Math.min(Math.max(y, -0.5), picture.height - 0.5)];
}
