// The review page from end to end: what begins when, and how a photograph is opened.

import * as act from "./act.js";
import { on, tell } from "./bell.js";
import * as checked from "./checked.js";
import { showUnder } from "./cross.js";
import * as doubtful from "./doubtful.js";
import * as early from "./early.js";
import { byId } from "./elements.js";
import { listen } from "./events.js";
import { hand } from "./hand.js";
import * as help from "./help.js";
import * as keys from "./keys.js";
import * as looks from "./looks.js";
import * as loupe from "./loupe.js";
import { takeUp, waitingFor } from "./outbox.js";
import * as panel from "./panel.js";
import * as person from "./person.js";
import * as photograph from "./photograph.js";
import * as pointer from "./pointer.js";
import * as queue from "./queue.js";
import { open, sheet } from "./sheet.js";
import * as spotCheck from "./spot_check.js";
import * as stage from "./stage.js";
import * as status from "./status.js";
import * as tools from "./tools.js";
import { setPicture, showWhole, view, zoom } from "./view.js";

let opening = 0;

/** Opens a photograph: its spots, its picture, and what happens to it from now on. */
async function openSheet(id) {
  opening += 1;
  const own = opening;
  act.hurry();
  try {
    await open(id, () => waitingFor(id));
  } catch (trouble) {
    if (own === opening) status.showTrouble({ message: trouble.code ? trouble.message : "The server does not answer; start strewn review again on this folder." });
    return;
  }
  if (own !== opening) return;
  status.showTrouble(null);
  status.showNotices(sheet.notices);
  location.replace(`#${id}`);
  listen();
  setPicture(sheet.width, sheet.height);
  showFacts();
  photograph.show(id, sheet.picture, sheet.width, sheet.height);
}

/** Reads the open sheet anew: it was changed beneath the page. */
async function reread() {
  const { id } = sheet;
  try {
    await open(id, () => waitingFor(id));
  } catch (trouble) {
    return status.showTrouble({ message: trouble.message });
  }
  status.showTrouble(null);
  status.showNotices(sheet.notices);
  listen();
  showFacts();
}

/** Lets the facts about the open sheet be seen in the page itself. */
function showFacts() {
  const { dataset } = byId("stage");
  dataset.sheet = sheet.id;
  dataset.revision = sheet.revision;
  dataset.counted = sheet.spots.total;
  byId("count-now").textContent = sheet.spots.total.toLocaleString("en");
}

/** Lets it be seen in the page itself which part of the photograph is shown. */
function showPlace() {
  Object.assign(byId("stage").dataset, { scale: view.scale, left: view.x, top: view.y, cross: `${hand.cross.x} ${hand.cross.y}` });
}

/** The buttons that belong to the stage. */
function startStageButtons() {
  byId("zoom-in").addEventListener("click", () => zoom(1.4));
  byId("zoom-out").addEventListener("click", () => zoom(1 / 1.4));
  byId("zoom-whole").addEventListener("click", showWhole);
}

/** Begins. */
async function start() {
  status.start();
  stage.start();
  looks.start();
  loupe.start();
  panel.start();
  act.start();
  tools.start();
  pointer.start();
  doubtful.start();
  queue.start(openSheet);
  keys.start();
  help.start(keys.LISTED);
  startStageButtons();
  for (const news of ["spots", "changed", "edited"]) on(news, showFacts);
  on("view", showPlace);
  on("pointer", showPlace);
  on("stale", reread);
  on("hovered", showUnder);
  await queue.readQueue(early.queue);
  const session = await early.session;
  byId("folder").textContent = session.folder;
  person.start(session.who, session.limits.who);
  checked.start(session.limits.text);
  takeUp();
  spotCheck.start(session.spot_check);
  await openSheet(await early.first.id);
  tell("who");
  document.body.dataset.ready = "yes";
}

start().catch((trouble) => status.showTrouble({ message: trouble.message }));
