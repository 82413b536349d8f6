// The study area and the quadrats with their counts, beneath the rings.

import { layers } from "./looks.js";
import { linesOf } from "./outlines.js";
import { sheet } from "./sheet.js";
import { toScreen, view } from "./view.js";

/** What is laid over the photograph: the quadrats as the statistics have them, an area while it is drawn. */
export const ground = { quadrats: null, drawing: null };

/** Draws the ground of the present view. */
export function drawGround(context) {
  if (layers.rings && layers.grid && ground.quadrats && !ground.drawing) drawQuadrats(context, ground.quadrats);
  const geometry = ground.drawing ?? sheet.area?.geometry;
  if (geometry && layers.area && layers.rings) drawArea(context, geometry);
}

/** Follows the lines of an outline. */
function trace(context, lines) {
  for (const line of lines) {
    line.forEach(([x, y], index) => {
      const [sx, sy] = toScreen(x, y);
      if (index) context.lineTo(sx, sy);
      else context.moveTo(sx, sy);
    });
    context.closePath();
  }
}

/** Darkens what lies outside the study area, and draws its edge. */
function drawArea(context, geometry) {
  const lines = linesOf(geometry);
  context.beginPath();
  context.rect(-2, -2, view.width + 4, view.height + 4);
  trace(context, lines);
  context.fillStyle = "rgba(10, 15, 20, 0.34)";
  context.fill("evenodd");
  context.beginPath();
  trace(context, lines);
  context.strokeStyle = "rgba(8, 13, 18, 0.75)";
  context.lineWidth = 3.6;
  context.stroke();
  context.setLineDash([10, 6]);
  context.strokeStyle = "#fff7d6";
  context.lineWidth = 1.6;
  context.stroke();
  context.setLineDash([]);
}

/** Draws the quadrats and how many spots each holds. */
function drawQuadrats(context, { outlines, count, x, y }) {
  context.beginPath();
  trace(context, outlines.flat());
  context.strokeStyle = "rgba(8, 13, 18, 0.55)";
  context.lineWidth = 3;
  context.stroke();
  context.strokeStyle = "rgba(255, 255, 255, 0.85)";
  context.lineWidth = 1;
  context.stroke();
  context.font = "600 14px system-ui, sans-serif";
  context.textAlign = "center";
  context.textBaseline = "middle";
  count.forEach((number, index) => drawCount(context, String(number), ...toScreen(x[index], y[index])));
}

/** Draws a count on a dark ground, so that it is read on any photograph. */
function drawCount(context, text, x, y) {
  const half = 5 + 4.6 * text.length;
  context.fillStyle = "rgba(8, 13, 18, 0.7)";
  context.beginPath();
  context.roundRect(x - half, y - 10, 2 * half, 20, 6);
  context.fill();
  context.fillStyle = "#ffffff";
  context.fillText(text, x, y + 1);
}
