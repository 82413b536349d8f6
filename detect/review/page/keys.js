// Which keys do what; the help lists this very table.

import { redo, toggle as toggleSpot, undo } from "./act.js";
import { tell } from "./bell.js";
import { markAndNext } from "./checked.js";
import { hold, press, step } from "./cross.js";
import { callFalse, callReal, next, previous } from "./doubtful.js";
import { blind } from "./blind.js";
import { byId } from "./elements.js";
import { toggle as toggleHelp } from "./help.js";
import { keep, kept } from "./kept.js";
import { layers, showLayer } from "./looks.js";
import { toggle as toggleLoupe } from "./loupe.js";
import { marks } from "./marks.js";
import { hide as hideQueue, move, toggle as toggleQueue } from "./queue.js";
import { say } from "./speech.js";
import { grow } from "./tool_spot.js";
import { stepBack, take, TOOLS } from "./tools.js";
import { pan, showWhole, view, zoom } from "./view.js";

/** Whether single letters, digits and signs act. */
export const choice = { letters: true };

/** Keys on the photograph: [keys, what the help calls them, what they do, act]. */
const ON_STAGE = [
  [["ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"], "Arrow keys", "move the cross; with Shift, faster", arrow],
  [["Enter"], "Enter", "does at the cross what a click does", () => press()],
  [["Escape"], "Esc", "leaves what was begun, then puts the tool away", () => hideQueue() || stepBack()],
  [["PageUp", "PageDown"], "Page up, page down", "shift the photograph up and down", (key) => pan(0, (key === "PageUp" ? 0.8 : -0.8) * view.height)],
];

/** Keys that are single letters, digits or signs. */
const LETTERS = [
  [["d"], "D", "takes hold of a ring, a handle or an area at the cross; again, lets go", () => hold()],
  [["n"], "N", "next doubtful spot, most doubtful first", () => next()],
  [["p"], "P", "previous doubtful spot", () => previous()],
  [["k"], "K", "the chosen spot is real: keep it, go on", () => callReal()],
  [["x"], "X", "the chosen spot is not real: strike it, go on", () => callFalse()],
  [["s"], "S", "strikes the chosen spot, or restores it", () => (marks.chosen === null ? say("No spot is chosen.") : toggleSpot(marks.chosen))],
  [["[", "]"], "[ and ]", "make the chosen spot smaller and larger", (key) => grow(key === "[" ? 1 / 1.06 : 1.06)],
  [["u"], "U or Ctrl+Z", "undo", () => undo()],
  [["y"], "Y or Ctrl+Shift+Z", "do again what was undone", () => redo()],
  [["h"], "H, held down", "hides all marks while it is held", () => hideMarks()],
  [["g"], "G", "shows or hides the grid with its counts", () => showLayer("grid")],
  [["l"], "L", "shows or hides the loupe", () => toggleLoupe()],
  [["+", "="], "+", "zooms in", () => zoomCross(1.25)],
  [["-", "\u2212"], "\u2212", "zooms out", () => zoomCross(0.8)],
  [["0"], "0", "shows the whole photograph", () => showWhole()],
  [["1", "2", "3", "4", "5", "6", "7"], "1 to 7", "take the tools, in the order of their buttons", (key) => take(Object.keys(TOOLS)[Number(key) - 1])],
  [["c"], "C", "marks the photograph as checked and goes to the next", () => markAndNext()],
  [["q"], "Q", "lists the photographs", () => toggleQueue()],
  [[",", "."], ", and .", "previous and next photograph", (key) => move(key === "," ? -1 : 1)],
  [["?"], "?", "this list", () => toggleHelp()],
];

/** What the help lists. */
export const LISTED = [...ON_STAGE, ...LETTERS].map(([, name, words]) => [name, words]);

/** Moves the cross. */
function arrow(key, event) {
  const [dx, dy] = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[key];
  step(dx, dy, event.shiftKey);
}

/** Zooms about the middle of the stage. */
function zoomCross(factor) {
  zoom(factor);
}

/** Hides all marks until the key is let go, or the page loses the focus. */
function hideMarks() {
  showLayer("rings", false);
}

/** Shows all marks again. */
function showMarks() {
  if (!layers.rings) showLayer("rings", true);
}

/** Whether keys belong to what has the focus: a field, a list, an open dialogue. */
function belongsElsewhere(event) {
  const { target } = event;
  if (byId("help").open) return true;
  return target.isContentEditable || ["TEXTAREA", "SELECT"].includes(target.tagName) || (target.tagName === "INPUT" && target.type !== "checkbox");
}

/** Single letters, digits and signs that act now. */
function letters() {
  return blind.on ? blind.keys : LETTERS;
}

/** A key goes down. */
function pressed(event) {
  if (event.isComposing || belongsElsewhere(event)) return;
  if ((event.ctrlKey || event.metaKey) && !event.altKey) return turned(event);
  if (event.altKey || event.ctrlKey || event.metaKey) return;
  const own = event.target === byId("stage") || event.target === document.body;
  const key = event.key.length === 1 ? event.key.toLowerCase() : event.key;
  const row = (own ? ON_STAGE : []).find(([keys]) => keys.includes(key)) ?? (choice.letters ? letters() : []).find(([keys]) => keys.includes(key));
  if (!row) return;
  event.preventDefault();
  const repeats = row[0].includes("ArrowLeft") || ["+", "=", "-", "[", "]"].includes(key);
  if (!event.repeat || repeats) row[3](key, event);
}

/** Ctrl+Z and its likes. */
function turned(event) {
  const key = event.key.toLowerCase();
  if (key !== "z" && key !== "y") return;
  event.preventDefault();
  if (blind.on) return blind.undo();
  if (key === "y" || event.shiftKey) redo();
  else undo();
}

/** Begins. */
export function start() {
  choice.letters = kept("letters", true);
  byId("letters").checked = choice.letters;
  byId("letters").addEventListener("change", (event) => {
    choice.letters = event.target.checked;
    keep("letters", choice.letters);
  });
  document.addEventListener("keydown", pressed);
  document.addEventListener("keyup", (event) => event.key.toLowerCase() === "h" && showMarks());
  addEventListener("blur", showMarks);
  tell("keys");
}
