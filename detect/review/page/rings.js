// The rings: true radius; shape and colour by standing, origin and doubt; on a layer of their own.

import { blind } from "./blind.js";
import { sheet } from "./sheet.js";
import { view } from "./view.js";

/** The looks of a ring. */
export const LOOKS = ["found", "placed", "doubtful", "struck", "outside"];
const COLOURS = { found: "#62f0a4", placed: "#8ccbff", doubtful: "#ffb03b", struck: "#f3e9f7", outside: "#d5dade" };
const ORDER = [4, 0, 1, 2, 3]; // doubtful and struck ones last, so that nothing covers them
const HALO = "rgba(8, 13, 18, 0.72)";
const LARGEST_SPRITE = 64; // screen pixels of radius; larger ones are few, and drawn as they are
const ROOM = 14; // around a ring for its marks

const sprites = new Map();

/** Returns which look a spot has. */
export function lookOf(spots, row) {
  if (!spots.counted[row]) return 3;
  if (!spots.inside[row]) return 4;
  if (!spots.found[row]) return 1;
  return spots.doubt[row] > sheet.doubtful_above ? 2 : 0;
}

/** Draws one ring about a point: dark halo first, then the ring and the mark that tells its look. */
export function drawRing(context, look, x, y, radius) {
  const r = Math.max(radius, 2.5);
  const path = outline(LOOKS[look], x, y, r);
  context.lineCap = "round";
  context.strokeStyle = HALO;
  const width = look < 3 ? (r < 7 ? 1.5 : 1.9) : 1.3;
  context.lineWidth = width + (r < 7 ? 1.4 : 1.9);
  if (look === 4) context.setLineDash([1.5, 3.5]);
  context.stroke(path);
  context.strokeStyle = context.fillStyle = COLOURS[LOOKS[look]];
  context.lineWidth = width;
  context.stroke(path);
  context.setLineDash([]);
  if (look === 1) context.fill(diamond(x, y - r));
}

/** The lines of a ring. Marks keep their size, so that they are seen on the smallest ring too. */
function outline(look, x, y, r) {
  const path = new Path2D();
  if (look === "struck") {
    for (const turn of [0.12, 0.62]) {
      const part = new Path2D();
      part.arc(x, y, r, 2 * Math.PI * turn, 2 * Math.PI * (turn + 0.26));
      path.addPath(part);
    }
    const arm = Math.min(7, Math.max(3.2, 0.55 * r));
    path.moveTo(x - arm, y - arm);
    path.lineTo(x + arm, y + arm);
    path.moveTo(x - arm, y + arm);
    path.lineTo(x + arm, y - arm);
    return path;
  }
  path.arc(x, y, r, 0, 2 * Math.PI);
  if (look === "placed") path.addPath(diamond(x, y - r));
  if (look === "doubtful") {
    const [near, far] = [(r + 1) * Math.SQRT1_2, (r + 8) * Math.SQRT1_2];
    path.moveTo(x + near, y - near);
    path.lineTo(x + far, y - far);
  }
  return path;
}

/** The small diamond on top of a placed ring. */
function diamond(x, y) {
  const path = new Path2D();
  path.moveTo(x, y - 4.5);
  path.lineTo(x + 3.5, y);
  path.lineTo(x, y + 4.5);
  path.lineTo(x - 3.5, y);
  path.closePath();
  return path;
}

/** Returns a picture of a ring, made once for each look and half pixel of radius. */
function sprite(look, radius) {
  const key = `${look} ${radius} ${view.dpr}`;
  if (!sprites.has(key)) {
    const half = Math.ceil(radius) + ROOM;
    const canvas = new OffscreenCanvas(Math.ceil(2 * half * view.dpr), Math.ceil(2 * half * view.dpr));
    const context = canvas.getContext("2d");
    context.scale(view.dpr, view.dpr);
    drawRing(context, look, half, half, radius);
    sprites.set(key, { canvas, half });
  }
  return sprites.get(key);
}

/** Returns the rows in a rectangle of the photograph by look, struck ones only where they are wanted. */
export function rowsBy(x0, y0, x1, y1, withStruck) {
  if (blind.on) return [];
  const { spots } = sheet;
  const rows = LOOKS.map(() => []);
  const reach = spots.buckets.largest + ROOM / view.scale;
  spots.buckets.within(x0 - reach, y0 - reach, x1 + reach, y1 + reach, (row) => {
    const near = spots.radius[row] + ROOM / view.scale;
    if (spots.x[row] < x0 - near || spots.x[row] > x1 + near || spots.y[row] < y0 - near || spots.y[row] > y1 + near) return;
    const look = lookOf(spots, row);
    if (look !== 3 || withStruck) rows[look].push(row);
  });
  return ORDER.map((look) => rows[look].map((row) => [row, look])).flat();
}

/** Draws rings from one index to another; returns the index that comes next. */
export function drawRings(context, rows, from, seen, until = rows.length) {
  const end = Math.min(until, rows.length);
  for (let index = from; index < end; index += 1) drawOne(context, rows[index], seen);
  return end;
}

/** Draws one ring of a list. */
function drawOne(context, [row, look], seen) {
  const { spots } = sheet;
  const [x, y] = [(spots.x[row] - seen.x) * seen.scale, (spots.y[row] - seen.y) * seen.scale];
  const radius = spots.radius[row] * seen.scale;
  if (radius > LARGEST_SPRITE) return drawRing(context, look, x, y, radius);
  const { canvas, half } = sprite(look, Math.max(2.5, Math.round(2 * radius) / 2));
  context.drawImage(canvas, x - half, y - half, 2 * half, 2 * half);
}
