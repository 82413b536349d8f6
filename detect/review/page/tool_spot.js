// The usual tool: click a ring to strike or restore it, an empty place to place one; drag to move or resize.

import { choose, edit, place, toggle } from "./act.js";
import { tell } from "./bell.js";
import { ringAt } from "./hits.js";
import { handleUnder, marks } from "./marks.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { clamp, view } from "./view.js";

export const spotTool = {
  words: "Strike or place",
  task: "Click a ring that marks nothing real to strike it. Click an object that has no ring to place one.",
  handles: true,

  /** Takes hold of a handle, or of a counted ring. */
  grab(at) {
    const held = handleUnder(at.sx, at.sy, at.reach);
    if (held) return resizing(held);
    const row = ringAt(sheet.spots, at.x, at.y, at.slop);
    return row >= 0 && sheet.spots.counted[row] ? moving(sheet.spots.at(row), at) : null;
  },

  click(at) {
    const held = handleUnder(at.sx, at.sy, at.reach - 2);
    if (held) return choose(held.id);
    const row = ringAt(sheet.spots, at.x, at.y, at.slop);
    return row < 0 ? place(at.x, at.y) : toggle(sheet.spots.id[row]);
  },

  /** Shows what a click would act on. */
  hover(at) {
    const held = handleUnder(at.sx, at.sy, at.reach);
    const row = held ? -1 : ringAt(sheet.spots, at.x, at.y, at.slop);
    const id = held?.id ?? (row < 0 ? null : sheet.spots.id[row]);
    if (id === marks.hovered) return;
    marks.hovered = id;
    tell("marks");
    tell("hovered", id);
  },
};

/** A drag that moves a spot. */
function moving(spot, from) {
  const [dx, dy] = [spot.x - from.x, spot.y - from.y];
  return dragging(spot, (at) => {
    const [x, y] = clamp(at.x + dx, at.y + dy);
    return { x, y, radius: spot.radius };
  }, ({ x, y }) => {
    edit("move", { spot: spot.id, x, y });
    say("Moved.");
  });
}

/** A drag that makes a spot larger or smaller. */
function resizing(spot) {
  return dragging(spot, (at) => {
    const radius = Math.hypot(at.x - spot.x, at.y - spot.y) - 9 / view.scale;
    return { x: spot.x, y: spot.y, radius: Math.max(radius, 1) };
  }, ({ radius }) => {
    edit("resize", { spot: spot.id, radius });
    say("Resized.");
  });
}

/** A drag that shows a ring as it would be, and makes an edit of it in the end. */
function dragging(spot, changed, done) {
  const ghost = { x: spot.x, y: spot.y, radius: spot.radius };
  marks.ghosts.push(ghost);
  choose(spot.id);
  const end = () => {
    marks.ghosts = marks.ghosts.filter((each) => each !== ghost);
    tell("marks");
  };
  return {
    move: (at) => { Object.assign(ghost, changed(at)); tell("marks"); },
    drop: (at) => { end(); done(changed(at)); },
    cancel: end,
  };
}

/** Makes the chosen spot larger or smaller by a key. */
export function grow(factor) {
  const spot = marks.chosen === null ? null : sheet.spots.get(marks.chosen);
  if (!spot?.counted) return say("Choose a counted spot first.");
  edit("resize", { spot: spot.id, radius: Math.max(1, spot.radius * factor) });
  say(`Radius ${Math.max(1, spot.radius * factor).toFixed(1)} pixels.`);
}
