// Which tools there are, and which one is in hand.

import { setBar } from "./bar.js";
import { on, tell } from "./bell.js";
import { blind } from "./blind.js";
import { byId, button, make } from "./elements.js";
import { hand, letGo } from "./hand.js";
import { areaTool } from "./tool_area.js";
import { loopTool, rectangleTool } from "./tool_many.js";
import { forgetFirst, mergeTool, splitTool } from "./tool_parts.js";
import { scaleTool } from "./tool_scale.js";
import { spotTool } from "./tool_spot.js";
import { say } from "./speech.js";

/** The tools, in the order of their buttons and of their keys 1, 2, ... */
export const TOOLS = {
  spot: spotTool, box: rectangleTool, loop: loopTool, split: splitTool, merge: mergeTool, area: areaTool, scale: scaleTool,
};

/** Takes a tool in hand. */
export function take(name) {
  letGo();
  hand.tool?.end?.();
  hand.tool = TOOLS[name];
  for (const each of Object.keys(TOOLS)) byId(`tool-${each}`).setAttribute("aria-pressed", String(each === name));
  byId("stage").dataset.tool = name;
  setBar(hand.tool.task);
  hand.tool.begin?.();
  tell("marks");
}

/** Steps back: ends a drag, then what a tool has begun, then puts the tool away. */
export function stepBack() {
  if (blind.on) return;
  if (letGo() || hand.tool.escape?.()) {
    say("Left as it was.");
    tell("marks");
  } else if (hand.tool !== spotTool) take("spot");
}

/** Begins. */
export function start() {
  Object.entries(TOOLS).forEach(([name, tool], index) => {
    const made = button(tool.words, () => take(name), { id: `tool-${name}`, "aria-pressed": "false" });
    made.append(make("kbd", { "aria-hidden": "true" }, String(index + 1)));
    byId("tools").append(made);
  });
  take("spot");
  on("opened", () => { forgetFirst(); take("spot"); });
}
