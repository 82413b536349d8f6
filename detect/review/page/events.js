// What the server tells by itself: changes by others, statistics, and that it is there at all.

import { tell } from "./bell.js";
import { apply, sheet } from "./sheet.js";

const [FIRST_PAUSE, LONGEST_PAUSE] = [250, 4000]; // milliseconds between attempts
const REST_AFTER = 5000; // milliseconds out of sight

/** Whether the server answers, and whether it said that it ends. */
export const server = { there: true, ended: false };

let stream = null;
let [pause, timer, hidden] = [FIRST_PAUSE, 0, 0];

/** Listens to what happens to the open sheet from its present revision on. */
export function listen() {
  stream?.close();
  clearTimeout(timer);
  const { id, revision, generation } = sheet;
  const own = new EventSource(`api/sheets/${id}/events?after=${revision}&generation=${encodeURIComponent(generation)}`);
  stream = own;
  own.onopen = () => found();
  own.onerror = () => own === stream && lost();
  hear(own, "change", (change) => apply(change) || listen());
  hear(own, "panel", (panel) => tell("panel", panel));
  hear(own, "panel_wait", () => tell("panel-wait"));
  hear(own, "reload", () => tell("stale"));
  hear(own, "trouble", ({ error }) => tell("trouble", error));
  hear(own, "tiles", (progress) => tell("tiles", progress));
  hear(own, "bye", () => { server.ended = true; lost(); });
}

/** Calls `act` with the values of each event of one name. */
function hear(own, name, act) {
  own.addEventListener(name, (event) => own === stream && act(JSON.parse(event.data)));
}

/** Lets go of the stream while the tab is not seen: a browser holds few connections for all tabs together. */
function rest() {
  clearTimeout(hidden);
  if (document.hidden) hidden = setTimeout(() => { stream?.close(); stream = null; clearTimeout(timer); }, REST_AFTER);
  else if (stream === null && sheet.id) listen();
}

document.addEventListener("visibilitychange", rest);

/** The server answers. */
function found() {
  const news = !server.there;
  Object.assign(server, { there: true, ended: false });
  pause = FIRST_PAUSE;
  tell("server", server);
  if (news) tell("server-there");
}

/** The server does not answer: tries again, each time a little later. */
function lost() {
  stream?.close();
  server.there = false;
  tell("server", server);
  clearTimeout(timer);
  timer = setTimeout(listen, pause);
  pause = Math.min(2 * pause, LONGEST_PAUSE);
}
