// The tool for the scale: a line along something of known length.

import { edit } from "./act.js";
import { setBar } from "./bar.js";
import { tell } from "./bell.js";
import { button, make } from "./elements.js";
import { lined } from "./marks.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { clamp, toScreen } from "./view.js";

let line = null; // x1, y1, x2, y2 in pixels
let field = null; // where its length is typed

/** Returns the line as it is being drawn, or the one that was drawn before. */
function known() {
  return line ?? sheet.scale?.line?.slice(0, 4) ?? null;
}

/** Says what the scale is now, and what to do. */
function prompt() {
  const now = sheet.scale ? `Now 1 mm is ${(1 / sheet.scale.mm_per_px).toFixed(2)} pixels.` : "No scale is known.";
  setBar(`Drag along something of known length in the plane of the objects. ${now}`);
}

/** Asks for the length of the line, and says what it would come to. */
function offer() {
  const told = make("span", { id: "scale-told" });
  field = make("input", { id: "line-mm", type: "number", min: "0", step: "any", size: "7" });
  field.value = sheet.scale?.line?.[4] ?? "";
  const sure = button("Use this line", use, { class: "main", id: "use-line" });
  const follow = () => {
    const mm = Number(field.value);
    sure.disabled = !(mm > 0);
    told.textContent = effect(mm);
  };
  field.addEventListener("input", follow);
  field.addEventListener("keydown", (event) => event.key === "Enter" && !sure.disabled && use());
  setBar("", make("label", {}, "Length of this line in mm ", field), told, sure, button("Leave as it was", leave, { id: "leave-line" }));
  follow();
  field.focus();
}

/** Says what a length would do to the scale and the density. */
function effect(mm) {
  const pixels = Math.hypot(line[2] - line[0], line[3] - line[1]);
  if (!(mm > 0)) return `It is ${pixels.toFixed(1)} pixels long.`;
  const fresh = mm / pixels;
  if (!sheet.scale) return `1 mm would be ${(1 / fresh).toFixed(2)} pixels.`;
  const lengths = 100 * (fresh / sheet.scale.mm_per_px - 1);
  const density = 100 * ((sheet.scale.mm_per_px / fresh) ** 2 - 1);
  const signed = (value) => `${value < 0 ? "\u2212" : "+"}${Math.abs(value).toFixed(1)} %`;
  return `Lengths ${signed(lengths)}, density ${signed(density)}.`;
}

/** Uses the line. */
function use() {
  const mm = Number(field.value);
  edit("set_scale", { line, mm });
  line = null;
  prompt();
  tell("marks");
  say("The scale is changed; the statistics follow.");
}

/** Leaves the scale as it was. */
function leave() {
  line = null;
  prompt();
  tell("marks");
}

/** A drag of one end of the line. */
function dragging(fixed) {
  const to = (at) => { line = [...fixed, ...clamp(at.x, at.y)]; tell("marks"); };
  const before = line;
  return {
    move: to,
    drop: (at) => { to(at); offer(); },
    cancel: () => { line = before; },
  };
}

export const scaleTool = {
  words: "Scale line",
  task: "",

  begin: prompt,

  end() {
    line = null;
  },

  escape() {
    const begun = line !== null;
    if (begun) leave();
    return begun;
  },

  grab(at) {
    const drawn = known();
    if (drawn) {
      const ends = [drawn.slice(0, 2), drawn.slice(2)];
      const near = ends.findIndex((end) => Math.hypot(...toScreen(...end).map((value, i) => value - [at.sx, at.sy][i])) <= at.reach + 4);
      if (near >= 0) return dragging(ends[1 - near]);
    }
    return dragging(clamp(at.x, at.y));
  },

  draw(context) {
    const drawn = known();
    if (!drawn) return;
    const [x1, y1] = toScreen(drawn[0], drawn[1]);
    const [x2, y2] = toScreen(drawn[2], drawn[3]);
    const path = new Path2D();
    const length = Math.hypot(x2 - x1, y2 - y1) || 1;
    const [nx, ny] = [(-9 * (y2 - y1)) / length, (9 * (x2 - x1)) / length];
    path.moveTo(x1, y1);
    path.lineTo(x2, y2);
    for (const [x, y] of [[x1, y1], [x2, y2]]) {
      path.moveTo(x - nx, y - ny);
      path.lineTo(x + nx, y + ny);
    }
    lined(context, path, "#fff7d6", 2);
  },
};
