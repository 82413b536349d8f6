// The photographs of the folder, each with its state, and the way from one to the next.

import { on, tell } from "./bell.js";
import { byId, clock, counted, make } from "./elements.js";
import { get } from "./server.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";

const WORDS = { new: "new", in_review: "in review", checked: "checked", changed_since_checked: "changed since checked" };

let rows = [];
let openSheet = null; // opens a sheet by its id

/** Reads the queue anew. */
export async function readQueue(coming = get("api/queue")) {
  ({ sheets: rows } = await coming);
  show();
}

/** Returns the row of the open sheet. */
function place() {
  return rows.findIndex((row) => row.id === sheet.id);
}

/** Says in what state a photograph is, by whom and when. */
function stateOf(row) {
  if (row.trouble) return "cannot be read";
  if (row.state !== "checked") return WORDS[row.state] ?? row.state;
  return `checked by ${row.checked_by}, ${clock(row.checked_at)}`;
}

/** Shows where in the queue the open photograph is, and the list. */
function show() {
  const at = place();
  const done = rows.filter((row) => row.state === "checked").length;
  byId("photograph-name").textContent = rows[at]?.photograph ?? sheet.photograph ?? "";
  byId("photograph-place").textContent = rows.length > 1 ? `${at + 1} of ${rows.length}, ${done} checked` : stateOf(rows[at] ?? { state: "new" });
  byId("previous-photograph").disabled = at <= 0;
  byId("next-photograph").disabled = at < 0 || at >= rows.length - 1;
  const title = `${rows[at]?.photograph ?? "Review"} \u2013 Strewn`;
  if (document.title !== title) document.title = title;
  // A list that nobody sees is not made anew with every edit.
  if (!byId("queue-box").hidden) byId("queue").replaceChildren(...rows.map(line));
  showMark();
}

/** Makes the line of a photograph in the list. */
function line(row) {
  const state = row.trouble ? "trouble" : row.state;
  const made = make(
    "button", { type: "button", class: "photograph", "data-state": state, "aria-current": String(row.id === sheet.id) },
    make("span", { class: "badge", "aria-hidden": "true" }),
    make("span", { class: "name" }, row.photograph),
    make("span", { class: "state" }, stateOf(row)),
    make("span", { class: "count" }, row.trouble ? row.trouble.message : `${counted(row.counted, "spot")}, ${row.doubtful.toLocaleString("en")} doubtful${row.notes ? `, ${counted(row.notes, "note")}` : ""}`),
  );
  made.addEventListener("click", () => { hide(); go(row.id); });
  return make("li", {}, made);
}

/** Opens a photograph. */
async function go(id) {
  await openSheet(id);
  show();
  byId("stage").focus({ preventScroll: true });
}

/** Opens the next or the previous photograph. */
export function move(by) {
  const row = rows[place() + by];
  if (row) return go(row.id);
  say(by > 0 ? "This is the last photograph." : "This is the first photograph.");
  return null;
}

/** Opens the next photograph that is not checked, after this one or else from the first on. */
export function nextUnchecked() {
  const at = place();
  const row = [...rows.slice(at + 1), ...rows.slice(0, Math.max(at, 0))].find((each) => each.state !== "checked" && !each.trouble);
  if (row) return go(row.id);
  say("All photographs are checked.");
  return null;
}

/** Keeps the open photograph's line up to date. */
function follow() {
  const row = rows[place()];
  if (!row) return;
  Object.assign(row, sheet.review, { counted: sheet.spots.total, spots: sheet.spots.length });
  show();
}

/** Keeps the line of another photograph up to date: edits made there have been saved since. */
function followOther({ id, review }) {
  const row = rows.find((each) => each.id === id);
  if (row) Object.assign(row, review);
  show();
}

/** Shows the mark of the open photograph. */
function showMark() {
  const { state, checked_by: by, checked_at: time } = sheet.review;
  const checked = state === "checked";
  byId("mark-told").textContent = checked ? `Checked by ${by}, ${clock(time)}.`
    : state === "changed_since_checked" ? "Changed since it was marked as checked: mark it again." : "";
  byId("mark").hidden = checked;
  byId("unmark").hidden = !checked;
  const others = rows.some((row) => row.id !== sheet.id && row.state !== "checked" && !row.trouble);
  byId("mark-and-next").hidden = checked || !others;
  byId("go-next").hidden = !checked || !others;
  document.body.dataset.state = state ?? "";
}

/** Shows or hides the list. */
export function toggle(shown = byId("queue-box").hidden) {
  byId("queue-box").hidden = !shown;
  byId("photographs").setAttribute("aria-expanded", String(shown));
  if (!shown) return;
  show();
  readQueue().catch(() => show()).finally(() => byId("queue").querySelector('[aria-current="true"]')?.focus());
}

/** Hides the list; says whether it was shown. */
export function hide() {
  const shown = !byId("queue-box").hidden;
  if (shown) toggle(false);
  return shown;
}

/** Begins. */
export function start(open) {
  openSheet = open;
  byId("photographs").addEventListener("click", () => toggle());
  byId("previous-photograph").addEventListener("click", () => move(-1));
  byId("next-photograph").addEventListener("click", () => move(1));
  byId("queue-box").addEventListener("keydown", (event) => {
    if (event.key === "Escape" && hide()) byId("photographs").focus();
  });
  document.addEventListener("pointerdown", (event) => {
    if (!byId("queue-box").contains(event.target) && !byId("photographs").contains(event.target)) hide();
  });
  on("changed", follow);
  on("opened", follow);
  on("elsewhere", followOther);
  on("reread", follow);
  tell("queue");
}
