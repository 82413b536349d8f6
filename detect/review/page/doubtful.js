// Which spots to look at first: the doubtful ones, most doubtful first, one after the other.

import { choose, edit, strikeMany } from "./act.js";
import { on, tell } from "./bell.js";
import { moveTo } from "./cross.js";
import { byId, counted } from "./elements.js";
import { keep, kept } from "./kept.js";
import { marks } from "./marks.js";
import { doubtful, isDoubtful, sheet } from "./sheet.js";
import { say } from "./speech.js";
import { look } from "./view.js";

const NEAR = 22; // screen pixels of radius at which a doubtful spot is shown
const seen = { real: new Set(), trail: [] }; // what a person called real, and the way that was walked

/** Returns the ids of the doubtful spots that nobody has decided on, most doubtful first. */
function left() {
  return doubtful().map((row) => sheet.spots.id[row]).filter((id) => !seen.real.has(id));
}

/** Returns the ids of those that come after the doubtful ones: all others that were not looked at, least sure first. */
function others() {
  const walked = new Set(seen.trail);
  return doubtful(-1).map((row) => sheet.spots.id[row]).filter((id) => !seen.real.has(id) && !walked.has(id));
}

/** Goes to the next doubtful spot, most doubtful first; after the last one, to the least sure of the others. */
export function next() {
  const ids = left();
  const at = ids.indexOf(marks.chosen);
  if (ids.length) return go(at < 0 ? following(ids) : ids[(at + 1) % ids.length]);
  const [other] = others();
  return other === undefined ? say("Every spot was looked at.") : go(other);
}

/** Returns the first undecided spot that is no more doubtful than the one decided last. */
function following(ids) {
  const last = seen.trail.includes(marks.chosen) ? sheet.spots.get(marks.chosen) : null;
  return ids.find((id) => last && sheet.spots.get(id).doubt <= last.doubt) ?? ids[0];
}

/** Goes back along the way that was walked. */
export function previous() {
  const at = seen.trail.lastIndexOf(marks.chosen);
  const back = at > 0 ? seen.trail[at - 1] : at < 0 ? seen.trail[seen.trail.length - 1] : left().at(-1);
  if (back === undefined) return say("No doubtful spot before this one.");
  if (at > 0) seen.trail.length = at;
  return go(back);
}

/** Shows a doubtful spot, chosen and under the cross. */
function go(id) {
  const spot = sheet.spots.get(id);
  if (!spot) return;
  if (seen.trail.at(-1) !== id) seen.trail.push(id);
  look(spot.x, spot.y, NEAR / Math.max(spot.radius, 1));
  choose(id);
  moveTo(spot.x, spot.y);
  say(`Doubt ${spot.doubt.toFixed(2)}${spot.counted ? "" : ", struck"}. ${counted(left().length, "doubtful spot")} left. Real: K. Not real: X.`);
}

/** The chosen spot is real: it counts, and is not asked about again. */
export function callReal() {
  const spot = chosen();
  if (!spot) return;
  if (!spot.counted) edit("restore", { spot: spot.id });
  seen.real.add(spot.id);
  keep(`real ${sheet.id}`, [...seen.real]);
  showLeft();
  next();
}

/** The chosen spot is not real: it is struck, and the next one comes. */
export function callFalse() {
  const spot = chosen();
  if (!spot) return;
  if (spot.counted) edit("strike", { spot: spot.id });
  next();
}

/** Returns the chosen spot, or says that there is none. */
function chosen() {
  const spot = marks.chosen === null ? null : sheet.spots.get(marks.chosen);
  if (!spot) say("No spot is chosen: press N for the next doubtful one.");
  return spot;
}

/** Shows how many are left, and what can be said of the chosen one. */
function showLeft() {
  const { spots } = sheet;
  let number = 0;
  for (let row = 0; row < spots.length; row += 1) if (isDoubtful(row) && !seen.real.has(spots.id[row])) number += 1;
  byId("doubtful-left").textContent = number ? `${counted(number, "doubtful spot")} left to look at` : "No doubtful spot left";
  byId("doubtful-next").textContent = number ? "Next doubtful" : "Next least sure";
  byId("doubtful").dataset.left = number;
  const spot = marks.chosen === null ? null : sheet.spots.get(marks.chosen);
  const asked = spot !== null && spot.found && seen.trail.includes(spot.id);
  byId("doubtful-asked").hidden = !asked;
  if (asked) byId("doubtful-this").textContent = `Doubt ${spot.doubt.toFixed(2)}${spot.counted ? "" : ", struck"}. Is it real?`;
}

/** Returns the counted rows whose doubt is at least what the slider says. */
function above() {
  const limit = Number(byId("doubt-limit").value);
  const { spots } = sheet;
  const rows = [];
  for (let row = 0; row < spots.length; row += 1) if (spots.counted[row] && spots.found[row] && spots.doubt[row] >= limit) rows.push(row);
  return rows;
}

/** Shows which spots the slider would strike. */
function showAbove() {
  const open = byId("doubt-all").open;
  const rows = open ? above() : [];
  marks.preview = rows;
  byId("doubt-value").textContent = Number(byId("doubt-limit").value).toFixed(2);
  byId("doubt-strike").textContent = rows.length ? `Strike these ${counted(rows.length, "spot")}` : "Strike";
  byId("doubt-strike").disabled = !rows.length;
  tell("marks");
}

/** Strikes what the slider shows. */
function strikeAbove() {
  strikeMany(above().map((row) => sheet.spots.id[row]));
  byId("doubt-all").open = false;
  showAbove();
}

/** Begins with a sheet: nothing was looked at but what was called real before. */
function begin() {
  seen.real = new Set(kept(`real ${sheet.id}`, []));
  seen.trail = [];
  byId("doubt-limit").value = Math.max(sheet.doubtful_above, 0.5);
  showLeft();
  showAbove();
}

/** Begins. */
export function start() {
  byId("doubtful-next").addEventListener("click", next);
  byId("doubtful-previous").addEventListener("click", previous);
  byId("doubtful-real").addEventListener("click", callReal);
  byId("doubtful-false").addEventListener("click", callFalse);
  byId("doubt-limit").addEventListener("input", showAbove);
  byId("doubt-all").addEventListener("toggle", showAbove);
  byId("doubt-strike").addEventListener("click", strikeAbove);
  on("opened", begin);
  on("chosen", showLeft);
  on("spots", () => { if (sheet.id) showLeft(), byId("doubt-all").open && showAbove(); });
}
