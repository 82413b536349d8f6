// Edits on their way to the disk: kept in the browser until the server has acknowledged them.

import { on, tell } from "./bell.js";
import { forget, keep, kept, names } from "./kept.js";
import { Refused, post } from "./server.js";
import { apply, carryOut, sheet, takeBack } from "./sheet.js";

const [FIRST_PAUSE, LONGEST_PAUSE] = [300, 8000]; // milliseconds between attempts
const MOST = 500; // edits in one request
const MOST_LETTERS = 2_000_000; // in one request, well below the server's limit

/** How saving goes: how many edits wait, whether an attempt has failed, and why. */
export const saving = { waiting: 0, failed: false, why: "", kept: true };

const boxes = new Map(); // sheet -> [{ name, edit }]
const sending = new Set();
let [made, pause, timer] = [0, FIRST_PAUSE, 0];

/** Takes up what an earlier tab left behind. */
export function takeUp() {
  for (const name of names("edit ")) {
    const left = kept(name);
    if (left?.sheet && left.edit?.id) box(left.sheet).push({ name, edit: left.edit });
  }
  count();
  sendAll();
}

/** Makes an edit on the open sheet: keeps it, shows it, sends it. */
export function make(what, fields = {}, who = "") {
  const edit = { id: crypto.randomUUID(), time: new Date().toISOString(), who, what, ...fields };
  made += 1;
  const name = `edit ${String(Date.now()).padStart(14, "0")} ${String(made).padStart(6, "0")} ${edit.id}`;
  saving.kept = keep(name, { sheet: sheet.id, edit }) && saving.kept;
  box(sheet.id).push({ name, edit });
  carryOut(edit);
  count();
  if (saving.failed) wake();
  else send(sheet.id);
  return edit;
}

/** Returns the edits of a sheet that are not acknowledged yet. */
export function waitingFor(id) {
  return box(id).map((entry) => entry.edit);
}

/** Tries again at once: the server is said to be there. */
export function wake() {
  pause = FIRST_PAUSE;
  sendAll();
}

/** Sends whatever waits. */
function sendAll() {
  clearTimeout(timer);
  for (const id of boxes.keys()) send(id);
}

/** Returns the edits that wait for one sheet. */
function box(id) {
  if (!boxes.has(id)) boxes.set(id, []);
  return boxes.get(id);
}

/** Sends what waits for one sheet, one request at a time, so that the order stays. */
async function send(id) {
  if (sending.has(id) || !box(id).length) return;
  sending.add(id);
  try {
    while (box(id).length) take(id, await post(`api/sheets/${id}/amendments`, { amendments: batch(id) }));
  } catch (trouble) {
    stumble(id, trouble);
  } finally {
    sending.delete(id);
  }
}

/** Returns as many of the first edits as one request holds. */
function batch(id) {
  const edits = [];
  let letters = 0;
  for (const { edit } of box(id).slice(0, MOST)) {
    letters += JSON.stringify(edit).length;
    if (edits.length && letters > MOST_LETTERS) break;
    edits.push(edit);
  }
  return edits;
}

/** Takes the server's answer. */
function take(id, answer) {
  [saving.failed, saving.why, pause] = [false, "", FIRST_PAUSE];
  settle(id, answer);
}

/** Drops what was acknowledged or refused, and applies what changed. */
function settle(id, { generation, acknowledged = [], refused = [], changes = [] }) {
  const done = new Set([...acknowledged, ...refused.map((each) => each.id)]);
  const left = [];
  for (const entry of box(id)) {
    if (done.has(entry.edit.id)) forget(entry.name);
    else left.push(entry);
  }
  const progress = left.length < box(id).length;
  boxes.set(id, left);
  if (id === sheet.id) {
    takeBack(refused.map((each) => each.id));
    if (generation !== sheet.generation) tell("stale");
    else for (const change of changes) apply(change);
  } else if (changes.length) tell("elsewhere", { id, review: changes[changes.length - 1].review });
  for (const each of refused) tell("refused", each.message);
  count();
  if (!progress) throw new Refused(500, { code: "bug", message: "The server did not take the edits." });
}

/** Keeps what could not be saved, and tries again later, each time a little later. */
function stumble(id, trouble) {
  saving.failed = true;
  saving.why = trouble instanceof Refused ? trouble.message : "";
  if (trouble.body?.acknowledged) {
    try {
      settle(id, trouble.body);
    } catch {
      // Nothing of it was saved: all stays here.
    }
  }
  if (trouble.code === "json" || trouble.code === "request" || trouble.code === "not_found") saving.why += " The edits are kept in this browser.";
  count();
  clearTimeout(timer);
  timer = setTimeout(sendAll, pause * (0.8 + 0.4 * Math.random()));
  pause = Math.min(2 * pause, LONGEST_PAUSE);
}

/** Says how many edits wait. */
function count() {
  saving.waiting = [...boxes.values()].reduce((sum, entries) => sum + entries.length, 0);
  tell("saving", saving);
}

on("server-there", wake);
addEventListener("online", wake);
addEventListener("focus", () => saving.failed && wake());
addEventListener("beforeunload", (event) => {
  if (saving.waiting) event.preventDefault();
});
