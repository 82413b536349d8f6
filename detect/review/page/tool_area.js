// The tool for the study area: move it, size it, drag a corner, or draw a new one; then use it or not.

import { edit } from "./act.js";
import { tell } from "./bell.js";
import { setBar } from "./bar.js";
import { button, counted } from "./elements.js";
import { ground } from "./ground.js";
import { lined } from "./marks.js";
import { boxOf, changed, holder, linesOf, sizeOf } from "./outlines.js";
import { sheet } from "./sheet.js";
import { say } from "./speech.js";
import { clamp, toScreen } from "./view.js";

const FEW_CORNERS = 24; // up to so many, each corner can be dragged
const SIDES = 96; // of the outline that stands for a circle

let mode = "change"; // or "circle", "outline"
let corners = []; // of a new outline, while it is drawn

/** The area as it is being changed, or as it is. */
function geometry() {
  return ground.drawing ?? sheet.area?.geometry ?? null;
}

/** Shows an area that is not used yet. */
function show(drawing) {
  ground.drawing = drawing;
  tell("area");
}

/** Returns the handles of an area: of its box, and of its corners where they are few. */
function handles(area) {
  const [x0, y0, x1, y1] = boxOf(area);
  const [xm, ym] = [(x0 + x1) / 2, (y0 + y1) / 2];
  const made = [[x0, y0], [xm, y0], [x1, y0], [x1, ym], [x1, y1], [xm, y1], [x0, y1], [x0, ym]].map(([x, y]) => ({ x, y, kind: "box" }));
  const outline = linesOf(area)[0];
  if (area.type === "Polygon" && outline.length <= FEW_CORNERS + 1) {
    return outline.slice(0, -1).map(([x, y], index) => ({ x, y, kind: "corner", index }));
  }
  return made;
}

/** Returns how many counted spots lie in an area. */
function countIn(area) {
  const { spots } = sheet;
  const holds = holder(area);
  let count = 0;
  for (let row = 0; row < spots.length; row += 1) if (spots.counted[row] && holds(spots.x[row], spots.y[row])) count += 1;
  return count;
}

/** Says what a new area would come to, and offers to use it. */
function offer() {
  const drawn = ground.drawing;
  if (!drawn) return prompt();
  const [before, after] = [sheet.area.geometry, drawn];
  const percent = 100 * (sizeOf(after) / sizeOf(before) - 1);
  const size = Math.abs(percent) < 0.05 ? "the same size" : `${Math.abs(percent).toFixed(1)} % ${percent > 0 ? "larger" : "smaller"}`;
  const sentence = `The new study area is ${size} and holds ${counted(countIn(after), "spot")}; before: ${countIn(before).toLocaleString("en")}.`;
  setBar(sentence, button("Use this area", use, { class: "main", id: "use-area" }), button("Leave as it was", leave, { id: "leave-area" }));
  say(sentence);
}

/** Uses the new area. */
function use() {
  const area = ground.drawing;
  ground.drawing = null;
  corners = [];
  mode = "change";
  edit("set_area", { area });
  tell("area");
  prompt();
  say("The study area is changed; the statistics follow.");
}

/** Leaves the area as it was. */
function leave() {
  corners = [];
  mode = "change";
  show(null);
  prompt();
}

/** Says what to do, with a button for each way. */
function prompt() {
  const sentence = {
    change: "Drag the study area to move it, or its square handles to change it. The statistics follow once you use it.",
    circle: "Drag from the middle of the new study area to its edge.",
    outline: "Click the corners of the new study area one after the other; click the first again to close it.",
  }[mode];
  const way = (name, words) => button(words, () => begin(name), { "aria-pressed": String(mode === name), id: `area-${name}` });
  setBar(sentence, way("change", "Change it"), way("circle", "New circle"), way("outline", "New corners"));
}

/** Begins one of the ways. */
function begin(name) {
  mode = name;
  corners = [];
  show(null);
  prompt();
}

/** A drag that changes the area from what it was. */
function dragging(from, drawn) {
  const before = ground.drawing;
  return {
    move: (at) => show(drawn(at)),
    drop: (at) => { show(drawn(at)); offer(); },
    cancel: () => show(before),
  };
}

/** A drag of one handle: a corner alone, or the whole area with its box. */
function dragHandle(handle, area) {
  if (handle.kind === "corner") {
    return dragging(handle, (at) => {
      const outline = area.coordinates[0].map((place, index) => (index === handle.index ? clamp(at.x, at.y) : place));
      outline[outline.length - 1] = outline[0];
      return { type: "Polygon", coordinates: [outline, ...area.coordinates.slice(1)] };
    });
  }
  const [x0, y0, x1, y1] = boxOf(area);
  const [fx, fy] = [handle.x === x0 ? x1 : x0, handle.y === y0 ? y1 : y0];
  const [wide, high] = [handle.x === x0 || handle.x === x1, handle.y === y0 || handle.y === y1];
  return dragging(handle, (at) => {
    let sx = wide ? (at.x - fx) / (handle.x - fx) : 1;
    let sy = high ? (at.y - fy) / (handle.y - fy) : 1;
    if (wide && high) sx = sy = Math.max(sx, sy);
    [sx, sy] = [Math.max(sx, 0.05), Math.max(sy, 0.05)];
    return changed(area, (x, y) => clamp(fx + (x - fx) * sx, fy + (y - fy) * sy));
  });
}

/** Returns an area moved, no further than the edge of the photograph. */
function moved(area, dx, dy) {
  const [left, top, right, bottom] = boxOf(area);
  const sx = Math.min(Math.max(dx, -0.5 - left), sheet.width - 0.5 - right);
  const sy = Math.min(Math.max(dy, -0.5 - top), sheet.height - 0.5 - bottom);
  return changed(area, (x, y) => [x + sx, y + sy]);
}

/** A drag that draws a circle from its middle. */
function drawingCircle(from) {
  return dragging(from, (at) => {
    const room = Math.min(from.x + 0.5, from.y + 0.5, sheet.width - 0.5 - from.x, sheet.height - 0.5 - from.y);
    const radius = Math.max(4, Math.min(room, Math.hypot(at.x - from.x, at.y - from.y)));
    const line = Array.from({ length: SIDES }, (_, i) => [from.x + radius * Math.cos((2 * Math.PI * i) / SIDES), from.y + radius * Math.sin((2 * Math.PI * i) / SIDES)]);
    return { type: "Polygon", coordinates: [[...line, line[0]]] };
  });
}

export const areaTool = {
  words: "Study area",
  task: "",

  begin() {
    begin("change");
  },

  end() {
    corners = [];
    show(null);
  },

  escape() {
    if (!ground.drawing && !corners.length) return false;
    leave();
    return true;
  },

  grab(at) {
    if (mode === "circle") return drawingCircle({ x: clamp(at.x, at.y)[0], y: clamp(at.x, at.y)[1] });
    const area = geometry();
    if (mode === "outline" || !area) return null;
    const handle = handles(area).find(({ x, y }) => Math.hypot(...toScreen(x, y).map((value, i) => value - [at.sx, at.sy][i])) <= at.reach + 4);
    if (handle) return dragHandle(handle, area);
    if (!holder(area)(at.x, at.y)) return null;
    return dragging(at, (to) => moved(area, to.x - at.x, to.y - at.y));
  },

  click(at) {
    if (mode !== "outline") return;
    if (corners.length >= 3 && Math.hypot(...toScreen(...corners[0]).map((value, i) => value - [at.sx, at.sy][i])) <= at.reach + 4) {
      show({ type: "Polygon", coordinates: [[...corners, corners[0]]] });
      corners = [];
      mode = "change";
      offer();
      return;
    }
    corners.push(clamp(at.x, at.y));
    say(`${counted(corners.length, "corner")}.`);
    tell("marks");
  },

  draw(context) {
    const path = new Path2D();
    const square = ([x, y]) => path.rect(x - 5, y - 5, 10, 10);
    if (mode === "change" && geometry()) for (const { x, y } of handles(geometry())) square(toScreen(x, y));
    corners.forEach((place, index) => {
      const [sx, sy] = toScreen(...place);
      square([sx, sy]);
      if (index) path.moveTo(...toScreen(...corners[index - 1])), path.lineTo(sx, sy);
    });
    lined(context, path, "#fff7d6", 2);
  },
};
