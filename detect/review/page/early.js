// What the page needs first, asked for while the rest of the page is still on its way.

import { get, picture } from "./server.js";

/** Which sheet to open: the one in the address, else the first that is not checked, else the first. */
function choose({ sheets }) {
  const wanted = location.hash.slice(1);
  const open = (row) => row.state !== "checked" && !row.trouble;
  return (sheets.find((row) => row.id === wanted) ?? sheets.find(open) ?? sheets[0]).id;
}

export const session = get("api/session");
export const queue = get("api/queue");

/** The sheet that is opened first, and its photograph where it comes whole; each is used once. */
export const first = { id: queue.then(choose), sheet: null, picture: null };
first.sheet = first.id.then((id) => get(`api/sheets/${id}`));
first.picture = first.sheet.then(({ picture: info }) => (info.kind === "whole" ? picture(info.url) : null));
// Whoever needs them tells what went wrong.
for (const promise of [session, queue, first.id, first.sheet, first.picture]) promise.catch(() => {});

/** Returns what was asked for early, once; later it is asked for anew. */
export function early(name, id) {
  const promise = first.chosen === id ? first[name] : null;
  first[name] = null;
  return promise;
}
first.id.then((id) => { first.chosen = id; }, () => {});
