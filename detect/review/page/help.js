// The help: what the rings mean, what the hand does, what the keys do.

import { byId, make } from "./elements.js";
import { drawRing, LOOKS } from "./rings.js";

const MEANING = {
  found: "found by the detector, counted",
  placed: "placed by a person, counted (small diamond)",
  doubtful: "counted, but doubtful (tick outside)",
  struck: "struck: not counted (broken ring, crossed out)",
  outside: "outside the study area: not counted (dots)",
};

/** Draws the rings and says what each means. */
function legend() {
  return LOOKS.map((look, index) => {
    const canvas = make("canvas", { width: 80, height: 64, class: "sample", "aria-hidden": "true" });
    const context = canvas.getContext("2d");
    context.fillStyle = "#5d6b63";
    context.fillRect(0, 0, 80, 64);
    context.scale(2, 2);
    drawRing(context, index, 19, 17, 9);
    return make("li", {}, canvas, make("span", {}, MEANING[look]));
  });
}

/** Shows or hides the help. */
export function toggle(shown = !byId("help").open) {
  const help = byId("help");
  if (shown && !help.open) help.showModal();
  if (!shown) help.close();
}

/** Begins. */
export function start(listed) {
  byId("legend").replaceChildren(...legend());
  byId("legend-help").replaceChildren(...legend());
  byId("key-list").replaceChildren(...listed.flatMap(([name, words]) => [make("dt", {}, name), make("dd", {}, words)]));
  byId("help-button").addEventListener("click", () => toggle(true));
  byId("help-close").addEventListener("click", () => toggle(false));
  byId("help").addEventListener("click", (event) => event.target === byId("help") && toggle(false));
}
