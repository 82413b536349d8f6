// Who is checking.

import { tell } from "./bell.js";
import { byId } from "./elements.js";
import { keep, kept } from "./kept.js";

/** Begins: the name last given here, or else the one that the server suggests. */
export function start(suggestion, longest) {
  const field = byId("who");
  field.maxLength = longest;
  field.value = kept("who") ?? suggestion;
  field.addEventListener("change", () => {
    keep("who", field.value.trim());
    tell("who");
  });
}

/** Returns the name under which edits are made. */
export function who() {
  return byId("who").value.trim() || "no name given";
}
