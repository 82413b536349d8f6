// Two tools that strike many spots: all in a rectangle, all in a loop.

import { strikeMany } from "./act.js";
import { tell } from "./bell.js";
import { inside } from "./hits.js";
import { lined } from "./marks.js";
import { sheet } from "./sheet.js";
import { toScreen } from "./view.js";

let loop = null; // the places drawn so far

/** Draws what is being drawn, and which spots it holds. */
function drawLoop(context) {
  if (!loop) return;
  const path = new Path2D();
  loop.forEach(([x, y], index) => path[index ? "lineTo" : "moveTo"](...toScreen(x, y)));
  path.closePath();
  context.fillStyle = "rgba(255, 143, 178, 0.16)";
  context.fill(path, "evenodd");
  lined(context, path, "#ff8fb2", 1.8, [7, 4]);
}

/** A drag that ends in striking all counted spots inside what it drew. */
function striking(first, next) {
  loop = first;
  const end = () => {
    loop = null;
    tell("marks");
  };
  return {
    move: (at) => { loop = next(at, loop); tell("marks"); },
    drop: (at) => {
      const rows = inside(sheet.spots, next(at, loop));
      end();
      strikeMany(rows.map((row) => sheet.spots.id[row]));
    },
    cancel: end,
  };
}

export const rectangleTool = {
  words: "Strike a box",
  task: "Drag a box over the spots to strike, all in one. Undo brings them back.",
  draw: drawLoop,
  grab: ({ x, y }) => striking([[x, y]], (at) => [[x, y], [at.x, y], [at.x, at.y], [x, at.y]]),
};

export const loopTool = {
  words: "Strike a loop",
  task: "Drag a loop around the spots to strike, all in one. Undo brings them back.",
  draw: drawLoop,
  grab: ({ x, y }) => striking([[x, y]], (at, drawn) => [...drawn, [at.x, at.y]]),
};
