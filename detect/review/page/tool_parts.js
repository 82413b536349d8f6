// Two tools for objects and rings that do not go one to one: split one spot in two, merge two into one.

import { choose, edit, fit, freshId } from "./act.js";
import { tell } from "./bell.js";
import { byId, counted } from "./elements.js";
import { ringAt } from "./hits.js";
import { lined, marks } from "./marks.js";
import { greyAround } from "./photograph.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { toScreen, view } from "./view.js";

/** Returns the counted spot at a point, or says that there is none. */
function countedAt(at) {
  const row = ringAt(sheet.spots, at.x, at.y, at.slop);
  if (row >= 0 && sheet.spots.counted[row]) return sheet.spots.at(row);
  say("Click a counted ring.");
  return null;
}

/** Does something that waits for the server's fit, and lets it be seen that it does. */
async function fitting(work) {
  byId("stage").dataset.placing = 1;
  await work();
  byId("stage").dataset.placing = 0;
}

/** Returns a circle fitted near where it was guessed, or the guess. */
async function near(guess, reach) {
  const found = await fit(guess.x, guess.y, guess.radius);
  const close = found && Math.hypot(found.x - guess.x, found.y - guess.y) < reach;
  return close && found.radius < 1.4 * guess.radius && found.radius > guess.radius / 1.6 ? found : guess;
}

/** Returns in which direction the object in a ring is longest, in radians. */
function longest({ x, y, radius }) {
  const { size, grey } = greyAround(x, y, 1.1 * radius);
  const middle = (size - 1) / 2;
  const rim = [];
  grey.forEach((value, i) => Math.hypot((i % size) - middle, Math.floor(i / size) - middle) > 0.9 * middle && rim.push(value));
  const ground = rim.sort((a, b) => a - b)[rim.length >> 1] ?? 0;
  let [xx, yy, xy] = [0, 0, 0];
  grey.forEach((value, i) => {
    const [dx, dy] = [(i % size) - middle, Math.floor(i / size) - middle];
    if (Math.hypot(dx, dy) > 0.95 * middle) return;
    const weight = Math.abs(value - ground);
    [xx, yy, xy] = [xx + weight * dx * dx, yy + weight * dy * dy, xy + weight * dx * dy];
  });
  return 0.5 * Math.atan2(2 * xy, xx - yy);
}

/** Splits a spot in two along a direction. */
async function split(spot, angle) {
  const radius = Math.max(1, spot.radius * Math.SQRT1_2);
  const [dx, dy] = [0.55 * spot.radius * Math.cos(angle), 0.55 * spot.radius * Math.sin(angle)];
  const guesses = [1, -1].map((side) => ({ x: spot.x + side * dx, y: spot.y + side * dy, radius })).map(within);
  let parts = await Promise.all(guesses.map((guess) => near(guess, 0.3 * spot.radius)));
  if (Math.hypot(parts[0].x - parts[1].x, parts[0].y - parts[1].y) < 0.6 * spot.radius) parts = guesses;
  if (!sheet.spots.get(spot.id)?.counted) return say("That spot has changed meanwhile.");
  edit("split", { spot: spot.id, parts: parts.map((part) => ({ spot: freshId(), x: part.x, y: part.y, radius: part.radius })) });
  choose(null);
  say(`Split in two: ${counted(sheet.spots.total, "spot")} counted. Drag the parts if they do not fit.`);
}

/** Keeps the middle of a circle on the photograph. */
function within({ x, y, radius }) {
  return { x: Math.min(Math.max(x, -0.5), sheet.width - 0.5), y: Math.min(Math.max(y, -0.5), sheet.height - 0.5), radius };
}

export const splitTool = {
  words: "Split",
  task: "Click a ring that holds two objects. To say where they lie, drag from the middle of the ring towards one of them.",

  click(at) {
    const spot = countedAt(at);
    if (spot) fitting(() => split(spot, longest(spot)));
  },

  grab(at) {
    const row = ringAt(sheet.spots, at.x, at.y, at.slop);
    if (row < 0 || !sheet.spots.counted[row]) return null;
    const spot = sheet.spots.at(row);
    const angle = (to) => Math.atan2(to.y - spot.y, to.x - spot.x);
    splitTool.shown = { spot, angle: 0 };
    return {
      move: (to) => { splitTool.shown = { spot, angle: angle(to) }; tell("marks"); },
      drop: (to) => { splitTool.shown = null; fitting(() => split(spot, angle(to))); },
      cancel: () => { splitTool.shown = null; },
    };
  },

  draw(context) {
    if (!splitTool.shown) return;
    const { spot, angle } = splitTool.shown;
    const [sx, sy] = toScreen(spot.x, spot.y);
    const r = spot.radius * view.scale + 12;
    const path = new Path2D();
    path.moveTo(sx - r * Math.cos(angle), sy - r * Math.sin(angle));
    path.lineTo(sx + r * Math.cos(angle), sy + r * Math.sin(angle));
    lined(context, path, "#8ccbff", 2);
  },
};

/** Merges two spots into the one that has their area together. */
async function merge(one, two) {
  const radius = Math.hypot(one.radius, two.radius);
  const share = one.radius ** 2 / radius ** 2;
  const guess = { x: share * one.x + (1 - share) * two.x, y: share * one.y + (1 - share) * two.y, radius };
  const { x, y, radius: fitted } = await near(guess, 0.4 * radius);
  if (!sheet.spots.get(one.id)?.counted || !sheet.spots.get(two.id)?.counted) return say("One of them has changed meanwhile.");
  const spot = freshId();
  edit("merge", { spots: [one.id, two.id], into: { spot, x, y, radius: fitted } });
  choose(spot);
  say(`Merged: ${counted(sheet.spots.total, "spot")} counted.`);
}

export const mergeTool = {
  words: "Merge",
  task: "Click two rings that lie on the same object, one after the other.",
  first: null,

  click(at) {
    const spot = countedAt(at);
    if (!spot) return;
    const first = mergeTool.first === null ? null : sheet.spots.get(mergeTool.first);
    if (!first?.counted || first.id === spot.id) {
      mergeTool.first = spot.id;
      choose(spot.id);
      say("Now click the other ring.");
      return;
    }
    mergeTool.first = null;
    fitting(() => merge(first, spot));
  },

  escape() {
    const begun = mergeTool.first !== null;
    mergeTool.first = null;
    return begun;
  },

  end() {
    mergeTool.first = null;
  },
};

/** Forgets a first ring when another sheet is opened. */
export function forgetFirst() {
  mergeTool.first = null;
  marks.chosen = null;
}
