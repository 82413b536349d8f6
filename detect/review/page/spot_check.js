// A spot check: one drawn quadrat after the other, marked by eye without the detections; then both are compared.

import { edit, freshId } from "./act.js";
import { setBar } from "./bar.js";
import { on, tell } from "./bell.js";
import { blind } from "./blind.js";
import { byId, counted, make } from "./elements.js";
import { ground } from "./ground.js";
import { hand, letGo } from "./hand.js";
import { forget, keep, kept } from "./kept.js";
import { lined, marks as chosen } from "./marks.js";
import { saving } from "./outbox.js";
import { boxOf, holder } from "./outlines.js";
import { who } from "./person.js";
import { get, post } from "./server.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { showTrouble } from "./status.js";
import { take } from "./tools.js";
import { look, toScreen, view, zoom } from "./view.js";

const NEAR = 9; // screen pixels from a mark within which a click takes it away
const PART = 0.62; // of the stage that a quadrat fills

/** The spot check of the open sheet: its quadrats, those done, and the places marked in the one that is shown. */
const check = { id: null, quadrats: [], at: 0, places: [], result: null };

const address = () => `api/sheets/${sheet.id}/spot_check`;
const draft = () => `spot check ${check.id} ${shown().quadrat}`;
const shown = () => check.quadrats[check.at];

/** The tool in hand: a click marks what is there, or takes a mark away. */
const markTool = {
  task: "Click the middle of everything that you see in the quadrat. Click a mark to take it away.",
  draw: drawPlaces,
  click: ({ sx, sy, x, y }) => toggle(sx, sy, x, y),
};

/** Draws the marks. */
function drawPlaces(context) {
  for (const [x, y] of check.places) {
    const [sx, sy] = toScreen(x, y);
    const path = new Path2D();
    path.moveTo(sx - 7, sy);
    path.lineTo(sx + 7, sy);
    path.moveTo(sx, sy - 7);
    path.lineTo(sx, sy + 7);
    lined(context, path, "#ffe45c", 2.2);
  }
}

/** Marks a place, or takes the mark there away. */
function toggle(sx, sy, x, y) {
  if (!blind.on || !shown() || check.result) return;
  const near = check.places.findIndex((place) => Math.hypot(...toScreen(...place).map((at, k) => at - [sx, sy][k])) <= NEAR);
  if (near >= 0) return setPlaces(check.places.filter((_, index) => index !== near), "Mark taken away");
  if (!holder(shown().outline)(x, y)) return say("That is outside the quadrat: only what has its middle inside counts.");
  setPlaces([...check.places, [x, y]], "Marked");
}

/** Takes over the marks of the quadrat that is shown, and keeps them in the browser until they are sent. */
function setPlaces(places, words) {
  check.places = places;
  keep(draft(), places);
  showCount();
  say(`${words}: ${counted(places.length, "mark")}.`);
  tell("marks");
}

/** Takes the last mark away. */
function takeLast() {
  if (check.places.length) setPlaces(check.places.slice(0, -1), "Last mark taken away");
  else say("Nothing is marked in this quadrat.");
}

/** Says how many marks there are, and how far the check is. */
function showCount() {
  const done = check.quadrats.filter((each) => each.count !== null).length;
  byId("spot-check-count").textContent = `${counted(check.places.length, "mark")} in this quadrat; ${done} of ${check.quadrats.length} done.`;
  Object.assign(byId("stage").dataset, { quadrat: shown()?.quadrat ?? "", places: check.places.length, done });
}

/** Shows one quadrat. */
function show(at) {
  check.at = at;
  const quadrat = shown();
  check.places = kept(draft()) ?? quadrat.marks ?? [];
  byId("spot-check-title").textContent = `Spot check: quadrat ${at + 1} of ${check.quadrats.length}`;
  byId("spot-check-back").disabled = at === 0;
  byId("spot-check-next").textContent = at + 1 < check.quadrats.length ? "Done: next quadrat" : "Done: compare";
  ground.drawing = quadrat.outline;
  const [left, top, right, bottom] = boxOf(quadrat.outline);
  zoom((PART * Math.min(view.width / (right - left), view.height / (bottom - top))) / view.scale);
  look((left + right) / 2, (top + bottom) / 2);
  Object.assign(hand.cross, { x: (left + right) / 2, y: (top + bottom) / 2 });
  showCount();
  tell("area");
  tell("marks");
  say(`Quadrat ${at + 1} of ${check.quadrats.length}.`);
}

/** Ends one quadrat: what was marked is sent, and the next one is shown. */
function next() {
  if (!blind.on || !shown() || check.result) return;
  const quadrat = shown();
  const places = check.places;
  if (JSON.stringify(quadrat.marks) !== JSON.stringify(places)) {
    edit("spot_check_marked", { of: check.id, quadrat: quadrat.quadrat, count: places.length, marks: places });
    Object.assign(quadrat, { count: places.length, marks: places });
  }
  forget(draft());
  const left = check.quadrats.findIndex((each) => each.count === null);
  if (check.at + 1 < check.quadrats.length) show(check.at + 1);
  else if (left >= 0) show(left);
  else compare();
}

/** Goes back to the quadrat before. */
function back() {
  if (blind.on && check.at > 0 && !check.result) show(check.at - 1);
}

/** Fetches the comparison, once everything is saved. */
async function compare() {
  showCount();
  if (!blind.on || check.result || !check.quadrats.length || check.quadrats.some((each) => each.count === null)) return;
  if (saving.waiting) return;
  try {
    showResult((await get(address())).result);
  } catch (trouble) {
    showTrouble({ message: trouble.message });
  }
}

/** Shows the comparison; the detections stay hidden until they are asked for. */
function showResult(result) {
  if (!result || check.result) return;
  check.result = result;
  document.body.dataset.mode = "spot-check-done";
  byId("spot-check-title").textContent = "Spot check: the result";
  byId("spot-check-count").textContent = "";
  byId("spot-check-sentence").textContent = result.sentence;
  byId("spot-check-sentence").dataset.trusted = result.trusted;
  byId("spot-check-figures").replaceChildren(...result.figures.flatMap(([name, value]) => [make("dt", {}, name), make("dd", {}, value)]));
  byId("spot-check-rows").replaceChildren(...result.quadrats.map(({ quadrat, detected, marked }) =>
    make("tr", {}, ...[quadrat, marked, detected].map((value) => make("td", {}, String(value))))));
  byId("spot-check-place").hidden = !result.missed.length;
  byId("spot-check-place").textContent = `Place the ${counted(result.missed.length, "spot")} that were missed`;
  for (const id of ["spot-check-asking", "spot-check-result"]) byId(id).hidden = id === "spot-check-asking";
  setBar("All quadrats are done. Show what was detected to go on with the review.");
  say("All quadrats are done: the result stands beside the photograph.");
}

/** Shows the detections again: from here on it is a review as any other. */
function unblind() {
  blind.on = false;
  delete document.body.dataset.mode;
  ground.drawing = null;
  byId("spot-check-show").hidden = true;
  take("spot");
  tell("area");
  tell("spots", null);
}

/** Places spots where a person marked objects that no spot counts for; only when asked. */
function placeMissed() {
  const { missed } = check.result;
  unblind();
  for (const [x, y] of missed) edit("place", { spot: freshId(), x, y, radius: sheet.usual_radius });
  byId("spot-check-place").hidden = true;
  say(`Placed ${counted(missed.length, "spot")}; the result of the spot check stays as it is.`);
}

/** Begins with a sheet: hides what was detected, draws quadrats unless that was done before. */
async function begin() {
  blind.on = true;
  document.body.dataset.mode = "spot-check";
  Object.assign(check, { id: null, quadrats: [], at: 0, places: [], result: null });
  chosen.chosen = chosen.hovered = null;
  letGo();
  hand.tool?.end?.();
  hand.tool = markTool;
  setBar(markTool.task);
  byId("spot-check").hidden = byId("spot-check-asking").hidden = false;
  byId("spot-check-result").hidden = byId("spot-check-show").hidden = true;
  byId("spot-check-show").hidden = false;
  byId("stage").dataset.places = 0;
  const { id } = sheet;
  try {
    const told = await post(address(), { who: who() });
    if (id !== sheet.id) return;
    Object.assign(check, { id: told.draw.id, quadrats: told.draw.quadrats });
    const left = check.quadrats.findIndex((each) => each.count === null);
    byId("spot-check-of").textContent = `${check.quadrats.length} of ${told.draw.all} quadrats were drawn at random. Nothing that was detected is shown.`;
    show(Math.max(left, 0));
    if (told.result) showResult(told.result);
  } catch (trouble) {
    showTrouble({ message: trouble.message });
  }
}

/** Begins, if the review is a spot check. */
export function start(wanted) {
  if (!wanted) return;
  blind.on = true;
  document.body.dataset.mode = "spot-check";
  blind.undo = takeLast;
  blind.keys = [
    [["n"], "N", "done: next quadrat", () => next()],
    [["b"], "B", "previous quadrat", () => back()],
    [["u"], "U", "takes the last mark away", () => takeLast()],
    [["+", "="], "+", "zooms in", () => zoom(1.25)],
    [["-", "\u2212"], "\u2212", "zooms out", () => zoom(0.8)],
    [["0"], "0", "shows the quadrat as at first", () => shown() && show(check.at)],
  ];
  byId("spot-check-next").addEventListener("click", next);
  byId("spot-check-back").addEventListener("click", back);
  byId("spot-check-undo").addEventListener("click", takeLast);
  byId("spot-check-show").addEventListener("click", unblind);
  byId("spot-check-place").addEventListener("click", placeMissed);
  on("opened", begin);
  on("saving", compare);
}
