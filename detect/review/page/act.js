// The edits that a person makes, by hand or by key, and what is said of them.

import { on, tell } from "./bell.js";
import { inWords } from "./edits.js";
import { byId, counted } from "./elements.js";
import { stacks } from "./history.js";
import { marks } from "./marks.js";
import { make, saving } from "./outbox.js";
import { who } from "./person.js";
import { get } from "./server.js";
import { onTheirWay, sheet } from "./sheet.js";
import { say } from "./speech.js";
import { follow } from "./view.js";

const FIT_WAITS = 3000; // milliseconds, after which a ring is placed as it was clicked; it is seen at once
const MOST_IDS = 20000; // spots in one edit

/** Makes an edit under the person's name. */
export function edit(what, fields) {
  return make(what, fields, who());
}

/** Returns a new name for a spot, never used before. */
export function freshId() {
  return crypto.randomUUID();
}

/** Chooses a spot: it is marked, and keys act on it. */
export function choose(id) {
  marks.chosen = id;
  tell("marks");
  tell("chosen");
}

/** Strikes a counted spot, counts a struck one again. */
export function toggle(id) {
  const spot = sheet.spots.get(id);
  if (!spot) return;
  edit(spot.counted ? "strike" : "restore", { spot: id });
  choose(id);
  say(`${spot.counted ? "Struck" : "Restored"}: ${counted(sheet.spots.total, "spot")} counted.`);
}

/** Strikes many spots in one edit. */
export function strikeMany(ids) {
  for (let at = 0; at < ids.length; at += MOST_IDS) edit("strike", { spots: ids.slice(at, at + MOST_IDS) });
  say(ids.length ? `Struck ${counted(ids.length, "spot")}: ${counted(sheet.spots.total, "spot")} counted. Undo brings them back.` : "No counted spot lies in there.");
}

const placing = new Set(); // rings that wait for their fit

/** Places a spot; its circle is fitted to the picture at that point. */
export async function place(x, y) {
  if (x < -0.5 || y < -0.5 || x > sheet.width - 0.5 || y > sheet.height - 0.5) return say("That is outside the photograph.");
  const ghost = { x, y, radius: sheet.usual_radius, sheet: sheet.id };
  marks.ghosts.push(ghost);
  placing.add(ghost);
  byId("stage").dataset.placing = placing.size;
  tell("marks");
  const circle = await fit(x, y);
  if (placing.has(ghost)) put(ghost, circle ?? ghost);
}

/** Makes the edit of a ring that waited for its fit. */
function put(ghost, { x, y, radius }) {
  placing.delete(ghost);
  marks.ghosts = marks.ghosts.filter((each) => each !== ghost);
  byId("stage").dataset.placing = placing.size;
  if (ghost.sheet !== sheet.id) return;
  const spot = freshId();
  edit("place", { spot, x, y, radius });
  choose(spot);
  say(`Placed: ${counted(sheet.spots.total, "spot")} counted.`);
}

/** Places at once whatever still waits for its fit: the page is being left. */
export function hurry() {
  for (const ghost of [...placing]) put(ghost, ghost);
}

/** Returns the circle that fits the picture at a point, or null where the server does not say. */
export async function fit(x, y, radius = null) {
  const size = radius === null ? "" : `&radius=${radius}`;
  try {
    const found = await get(`api/sheets/${sheet.id}/fit?x=${x}&y=${y}${size}`, { signal: AbortSignal.timeout(FIT_WAITS) });
    return found.fitted || radius === null ? { x: found.x, y: found.y, radius: found.radius } : null;
  } catch {
    return null;
  }
}

/** Returns what this person can undo and do again. */
function own() {
  return stacks([...sheet.history, ...onTheirWay()], who());
}

/** Takes back the person's last edit that stands. */
export function undo() {
  turn("undo", own().undoable.pop(), "Nothing of yours to undo.", "Undone");
}

/** Does the edit again that was undone last. */
export function redo() {
  turn("redo", own().redoable.pop(), "Nothing of yours to do again.", "Done again");
}

/** Undoes or does again one edit. */
function turn(what, of, nothing, done) {
  if (of === undefined) return say(nothing);
  const target = [...sheet.history, ...onTheirWay()].find((each) => each.id === of);
  const later = saving.failed && !onTheirWay().includes(target);
  edit(what, { of });
  say(later ? `${done} once the server is back: ${inWords(target.what)}.` : `${done}: ${inWords(target.what)}.`);
}

/** Shows whether there is something to undo or to do again. */
function showButtons() {
  const { undoable, redoable } = own();
  byId("undo").disabled = !undoable.length;
  byId("redo").disabled = !redoable.length;
}

/** Brings into sight what the person's own undo has changed. */
function showTurned({ amendment, spots }) {
  if (amendment.of && amendment.who === who() && spots.length === 1) follow(spots[0].x, spots[0].y);
}

/** Begins. */
export function start() {
  byId("undo").addEventListener("click", undo);
  byId("redo").addEventListener("click", redo);
  for (const news of ["edited", "changed", "who", "opened", "reread"]) on(news, showButtons);
  on("changed", showTurned);
  addEventListener("pagehide", hurry);
}
