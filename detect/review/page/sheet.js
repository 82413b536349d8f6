// The open sheet: what the server has confirmed, and on top of it the edits that are on their way.

import { tell } from "./bell.js";
import { early } from "./early.js";
import { after, touched, touches } from "./edits.js";
import { standing } from "./history.js";
import { holder } from "./outlines.js";
import { get } from "./server.js";
import { Spots } from "./spots.js";

/** All that is known of the open sheet; `id` is null while there is none. */
export const sheet = { id: null, spots: new Spots(), history: [], notes: [], revision: 0, review: {} };

let pending = []; // edits made here that no change from the server has brought back yet
let confirmed = new Map(); // spots under pending edits, as the server knows them
let confirmedArea = null;

/** Returns the edits that are on their way, in order. */
export function onTheirWay() {
  return pending;
}

/** Opens a sheet, or reads it anew, with the edits that still wait for the server on top. */
export async function open(id, waiting) {
  const fresh = await (early("sheet", id) ?? get(`api/sheets/${id}`));
  take(fresh, waiting());
}

/** Takes over a whole sheet. */
export function take(fresh, waiting) {
  const other = sheet.id !== fresh.id;
  Object.assign(sheet, fresh, { spots: new Spots(fresh.spots) });
  confirmedArea = fresh.area;
  confirmed = new Map();
  const known = new Set(fresh.history.map((each) => each.id));
  pending = waiting.filter((edit) => !known.has(edit.id));
  for (const edit of standing(pending)) for (const id of touched(edit)) show(id);
  sheet.area = null;
  showArea();
  tell(other ? "opened" : "reread");
}

/** Shows an edit that has just been made. */
export function carryOut(edit) {
  pending.push(edit);
  const ids = affected(edit);
  for (const id of ids) show(id);
  if (edit.what === "set_area" || edit.of) showArea();
  tell("spots", ids);
  tell("edited", edit);
}

/** Takes back edits that the server has refused. */
export function takeBack(ids) {
  const refused = new Set(ids);
  const gone = pending.filter((edit) => refused.has(edit.id));
  if (!gone.length) return;
  pending = pending.filter((edit) => !refused.has(edit.id));
  const spots = new Set(gone.flatMap((edit) => affected(edit, gone)));
  for (const id of spots) show(id);
  showArea();
  tell("spots", [...spots]);
  tell("edited", null);
}

/** Returns the ids of the spots whose look an edit on its way changes. */
function affected(edit, among = pending) {
  if (!edit.of) return touched(edit);
  const target = among.find((each) => each.id === edit.of) ?? pending.find((each) => each.id === edit.of);
  return target ? touched(target) : [];
}

/** Applies what the server says has happened; returns false where something before it is missing. */
export function apply(change) {
  if (change.revision <= sheet.revision) return true;
  if (change.revision > sheet.revision + 1) return false;
  sheet.revision = change.revision;
  const { amendment } = change;
  const { id, what, who, time, of = null } = amendment;
  sheet.history.push({ revision: change.revision, id, what, who, time, of, active: change.active });
  pending = pending.filter((edit) => edit.id !== id);
  takeNotes(amendment);
  sheet.review = { ...sheet.review, ...change.review };
  if (change.area) confirmedArea = change.area;
  if (change.scale !== undefined) sheet.scale = change.scale;
  const ids = [...change.spots.map((spot) => spot.id), ...change.gone];
  const told = new Map(change.spots.map((spot) => [spot.id, spot]));
  for (const spot of ids) {
    confirmed.set(spot, told.get(spot) ?? null);
    show(spot);
  }
  showArea();
  tell("spots", ids);
  tell("changed", change);
  return true;
}

/** Adds a note, or takes it off the list with its undoing. */
function takeNotes({ id, what, text, time, who, spot = null, of }) {
  if (what === "note") sheet.notes.push({ id, time, who, text, spot });
  if (what === "undo" || what === "redo") {
    const target = sheet.history.find((each) => each.id === of);
    if (target) target.active = what === "redo";
    const note = sheet.notes.find((each) => each.id === of);
    if (note) note.undone = what === "undo";
    else if (target?.what === "note") tell("stale");
  }
}

/** Shows a spot as the server knows it, with what is on its way. */
function show(id) {
  if (!confirmed.has(id)) confirmed.set(id, sheet.spots.get(id));
  let spot = confirmed.get(id);
  let waits = false;
  for (const edit of standing(pending)) {
    if (!touches(edit, id)) continue;
    spot = after(spot, id, edit);
    waits = true;
  }
  sheet.spots.set(id, spot);
  if (!waits && !pending.some((edit) => touches(edit, id))) confirmed.delete(id);
}

/** Shows the study area as the server knows it, or as drawn here last. */
function showArea() {
  const drawn = standing(pending).filter((edit) => edit.what === "set_area").pop();
  const shown = drawn ? { ...confirmedArea, geometry: drawn.area, changed: true } : confirmedArea;
  if (shown === sheet.area) return;
  sheet.area = shown;
  sheet.spots.lieIn(holder(shown?.geometry));
  tell("area");
  tell("spots", null);
}

/** Returns the rows of counted spots that were found with more than some doubt, most doubtful first. */
export function doubtful(above = sheet.doubtful_above) {
  const { spots } = sheet;
  const rows = [];
  for (let row = 0; row < spots.length; row += 1) if (isDoubtful(row, above)) rows.push(row);
  return rows.sort((a, b) => spots.doubt[b] - spots.doubt[a]);
}

/** Whether the spot in a row is counted, was found, and has more than some doubt. */
export function isDoubtful(row, above = sheet.doubtful_above) {
  const { spots } = sheet;
  return spots.counted[row] && spots.found[row] && spots.doubt[row] > above;
}
