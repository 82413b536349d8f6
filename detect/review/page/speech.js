// What is said to the person in one line, for eyes and for screen readers.

import { byId } from "./elements.js";

let again = false;

/** Says something; the same sentence twice is spoken twice. */
export function say(sentence) {
  again = !again;
  byId("said").textContent = sentence + (again ? "\u00a0" : "");
}
