// Whether everything is saved, and what went wrong: told where it is seen.

import { on } from "./bell.js";
import { byId, button, counted, make } from "./elements.js";
import { server } from "./events.js";
import { saving } from "./outbox.js";
import { photograph } from "./photograph.js";

/** Says whether all edits are on the disk. */
function showSaving() {
  const { waiting, failed, why, kept } = saving;
  const box = byId("saved");
  box.dataset.state = !waiting ? (server.there ? "saved" : "away") : failed || !server.there ? "waiting" : "saving";
  box.dataset.waiting = waiting;
  const reason = why || "The server does not answer; start strewn review again on this folder.";
  const safe = kept ? "They are kept in this browser and sent as soon as it can." : "This browser cannot keep them: do not close this tab.";
  const words = {
    saved: "All saved",
    saving: "Saving",
    away: `${server.ended ? "The server has ended" : "The server does not answer"}: edits will wait`,
    waiting: `Not saved: ${counted(waiting, "edit")} waiting`,
  }[box.dataset.state];
  byId("saved-words").textContent = words;
  const troubled = box.dataset.state === "waiting";
  byId("unsaved").hidden = !troubled;
  if (troubled) byId("unsaved").textContent = `${words}. ${reason} ${safe}`;
}

/** Tells of an edit that was not taken, until it is read. */
function showRefused(message) {
  const line = make("p", {}, make("strong", {}, "Not taken: "), message, " ", button("Understood", () => line.remove(), { class: "small" }));
  byId("refused").append(line);
}

/** Tells why there is no photograph, or that it is still to come. */
function showPhotograph() {
  const box = byId("no-photograph");
  const words = photograph.trouble || (photograph.ready ? "" : "Fetching the photograph");
  box.textContent = words;
  box.hidden = !words;
  byId("stage").dataset.photograph = photograph.ready ? "shown" : photograph.trouble ? "missing" : "coming";
}

/** Tells how far the making of tiles is. */
function showTiles({ done, total }) {
  byId("tiles").hidden = done >= total;
  byId("tiles").textContent = `Preparing this large photograph: ${done.toLocaleString("en")} of ${total.toLocaleString("en")} parts`;
}

/** Tells that a sheet or its log cannot be read. */
export function showTrouble(error) {
  byId("trouble").hidden = !error;
  byId("trouble").textContent = error ? error.message : "";
}

/** Tells what is to be known of the log. */
export function showNotices(notices) {
  byId("notices").replaceChildren(...notices.map((notice) => make("p", {}, notice)));
}

/** Begins. */
export function start() {
  on("saving", showSaving);
  on("server", showSaving);
  on("refused", showRefused);
  on("photograph", showPhotograph);
  on("tiles", showTiles);
  on("trouble", showTrouble);
  showSaving();
}
