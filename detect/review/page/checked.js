// Marking a photograph as checked, and notes.

import { edit } from "./act.js";
import { on } from "./bell.js";
import { byId, button, clock, make } from "./elements.js";
import { marks } from "./marks.js";
import { nextUnchecked } from "./queue.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { choose } from "./act.js";
import { look, view } from "./view.js";

/** Marks the open photograph as checked, once its person has a name. */
export function mark() {
  if (!byId("who").value.trim()) {
    byId("who").focus();
    say("Give your name first: the mark says who checked.");
    return false;
  }
  edit("checked");
  say(`${sheet.photograph} is marked as checked.`);
  return true;
}

/** Marks the photograph and opens the next one that is not checked. */
export function markAndNext() {
  if (mark()) nextUnchecked();
}

/** Takes the mark away. */
function unmark() {
  edit("unchecked");
  say("The mark is taken away.");
}

/** Writes a note, about the chosen spot where that is wished. */
function addNote() {
  const text = byId("note").value.trim();
  if (!text) return;
  const about = byId("note-about").checked && marks.chosen !== null ? { spot: marks.chosen } : {};
  edit("note", { text, ...about });
  byId("note").value = "";
  say("Note added.");
}

/** Shows the notes. */
function showNotes() {
  const standing = sheet.notes.filter((note) => !note.undone);
  byId("notes-title").textContent = standing.length ? `Notes (${standing.length})` : "Notes";
  byId("notes").replaceChildren(...standing.map((note) => make(
    "li", {},
    make("small", {}, `${note.who}, ${clock(note.time)}`),
    make("p", {}, note.text),
    note.spot === null ? null : button("Show its spot", () => showSpot(note.spot), { class: "small" }),
  )));
}

/** Shows the spot that a note is about. */
function showSpot(id) {
  const spot = sheet.spots.get(id);
  if (!spot) return say("That spot is no longer there.");
  choose(id);
  look(spot.x, spot.y, Math.max(view.scale, 22 / spot.radius));
}

/** Says about which spot a note would be. */
function showAbout() {
  byId("note-about").disabled = marks.chosen === null;
  if (marks.chosen === null) byId("note-about").checked = false;
}

/** Begins. */
export function start(longest) {
  byId("note").maxLength = longest;
  byId("mark").addEventListener("click", mark);
  byId("mark-and-next").addEventListener("click", markAndNext);
  byId("unmark").addEventListener("click", unmark);
  byId("go-next").addEventListener("click", nextUnchecked);
  byId("note-add").addEventListener("click", addNote);
  for (const news of ["opened", "reread", "changed"]) on(news, showNotes);
  for (const news of ["opened", "chosen"]) on(news, showAbout);
}
