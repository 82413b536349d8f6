// The line above the stage: one sentence that says what to do, and what a tool offers.

import { byId } from "./elements.js";

/** Says what to do, and offers some buttons or fields. */
export function setBar(sentence, ...offers) {
  byId("task").textContent = sentence;
  byId("offers").replaceChildren(...offers);
}
