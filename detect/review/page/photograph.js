// The photograph on the stage: one picture with reduced copies, or tiles.

import { tell } from "./bell.js";
import { early } from "./early.js";
import { Refused, picture } from "./server.js";
import { view } from "./view.js";

const SHARP_ABOVE = 3; // screen pixels for one pixel, above which pixels are shown as they are
const [MOST_TILES, MOST_AT_ONCE] = [300, 4];
const SOFT = 1.12; // screen pixels for one of a reduced copy, up to which it is shown
const SMALLEST_COPY = 900; // pixels on the longer side

/** The photograph that is shown; `trouble` says why there is none. */
export const photograph = { kind: "none", ready: false, trouble: "", copies: [], tiles: new Map(), info: null };

let loading = 0;

/** Begins to show another photograph. */
export async function show(id, info, width, height) {
  loading += 1;
  const own = loading;
  for (const copy of photograph.copies) copy.bitmap.close();
  Object.assign(photograph, { kind: info.kind, ready: false, trouble: info.message ?? "", copies: [], info, width, height });
  photograph.tiles = new Map();
  if (info.kind === "tiles") photograph.ready = true;
  if (info.kind === "whole") await loadWhole(early("picture", id) ?? picture(info.url), () => own === loading);
  tell("photograph");
}

/** Takes up a whole picture when it comes. */
async function loadWhole(coming, wanted) {
  try {
    const bitmap = await coming;
    if (!wanted()) return bitmap.close();
    photograph.copies = [{ shrink: 1, bitmap }];
    photograph.ready = true;
    setTimeout(() => addCopies(wanted), 60);
  } catch (trouble) {
    if (wanted()) photograph.trouble = trouble instanceof Refused ? trouble.message : "The photograph could not be fetched.";
  }
}

/** Adds copies of half the size, a quarter and so on, for looking from afar. */
async function addCopies(wanted) {
  let { bitmap } = photograph.copies[0];
  for (let shrink = 2; Math.max(bitmap.width, bitmap.height) > SMALLEST_COPY; shrink *= 2) {
    const size = { resizeWidth: Math.ceil(bitmap.width / 2), resizeHeight: Math.ceil(bitmap.height / 2) };
    bitmap = await createImageBitmap(bitmap, { ...size, resizeQuality: "medium" });
    if (!wanted()) return;
    photograph.copies.push({ shrink, bitmap });
  }
  tell("photograph");
}

/** Draws what is seen of the photograph; returns how many of its tiles are still missing. */
export function drawPhotograph(context, { scale, x, y, width, height } = view) {
  context.imageSmoothingEnabled = scale < SHARP_ABOVE;
  if (photograph.kind === "tiles") return drawTiles(context, { scale, x, y, width, height });
  const fits = photograph.copies.filter((copy) => copy.shrink * scale * view.dpr <= SOFT);
  const copy = fits[fits.length - 1] ?? photograph.copies[0];
  if (copy) drawPart(context, copy.bitmap, [-0.5, -0.5, photograph.width, photograph.height], { scale, x, y, width, height });
  return 0;
}

/** Draws the part in sight of a picture that covers a rectangle of the photograph. */
function drawPart(context, bitmap, [left, top, wide, high], { scale, x, y, width, height }) {
  const x0 = Math.max(left, x);
  const y0 = Math.max(top, y);
  const x1 = Math.min(left + wide, x + width / scale);
  const y1 = Math.min(top + high, y + height / scale);
  if (x1 <= x0 || y1 <= y0) return;
  const [fx, fy] = [bitmap.width / wide, bitmap.height / high];
  context.drawImage(
    bitmap, (x0 - left) * fx, (y0 - top) * fy, (x1 - x0) * fx, (y1 - y0) * fy,
    (x0 - x) * scale, (y0 - y) * scale, (x1 - x0) * scale, (y1 - y0) * scale,
  );
}

/** Draws the tiles in sight: the coarsest first, so that there is never a hole, the wanted ones on top. */
function drawTiles(context, seen) {
  const { levels } = photograph.info;
  const fits = levels.filter((level) => seen.scale * view.dpr <= 1.5 * level.shrink);
  const wanted = fits[fits.length - 1] ?? levels[0];
  const coarser = levels.filter((level) => level.level > wanted.level).reverse();
  for (const level of coarser) drawLevel(context, level, seen, level === coarser[0]);
  return drawLevel(context, wanted, seen, true);
}

/** Draws the tiles of one level that are there, and asks for the others; returns how many are missing. */
function drawLevel(context, level, seen, ask) {
  const side = photograph.info.tile / level.shrink;
  let missing = 0;
  const [c0, r0] = [Math.max(0, Math.floor(seen.x / side)), Math.max(0, Math.floor(seen.y / side))];
  const c1 = Math.min(level.columns - 1, Math.floor((seen.x + seen.width / seen.scale) / side));
  const r1 = Math.min(level.rows - 1, Math.floor((seen.y + seen.height / seen.scale) / side));
  for (let row = r0; row <= r1; row += 1) {
    for (let column = c0; column <= c1; column += 1) {
      const key = `${level.level}/${column}/${row}`;
      const bitmap = photograph.tiles.get(key);
      if (bitmap) {
        const size = [bitmap.width / level.shrink, bitmap.height / level.shrink];
        drawPart(context, bitmap, [column * side - 0.5, row * side - 0.5, ...size], seen);
      } else {
        missing += 1;
        if (ask && bitmap === undefined) fetchTile(key);
      }
    }
  }
  return missing;
}

let asking = 0;

/** Fetches a tile, a few at a time; the next drawing asks for what is still missing. */
async function fetchTile(key) {
  if (asking >= MOST_AT_ONCE) return;
  asking += 1;
  const { tiles, info } = photograph;
  tiles.set(key, null);
  try {
    const bitmap = await picture(`${info.url}/${key}`);
    tiles.delete(key);
    tiles.set(key, bitmap);
    if (tiles.size > MOST_TILES) tiles.delete(tiles.keys().next().value);
  } catch (trouble) {
    setTimeout(() => { tiles.delete(key); tell("photograph"); }, 1000 * (trouble.after ?? 1));
    if (trouble.code && trouble.code !== "tiles_not_ready") photograph.trouble = trouble.message;
  } finally {
    asking -= 1;
    tell("photograph");
  }
}

/** Returns the brightness of a small square of the photograph as { size, grey }, or null where it is not at hand. */
export function greyAround(x, y, half) {
  const size = Math.max(8, Math.min(64, Math.round(2 * half)));
  const canvas = new OffscreenCanvas(size, size);
  const context = canvas.getContext("2d", { willReadFrequently: true });
  const scale = size / (2 * half);
  drawPhotograph(context, { scale, x: x - half, y: y - half, width: size, height: size });
  const { data } = context.getImageData(0, 0, size, size);
  const grey = new Float32Array(size * size);
  for (let i = 0; i < grey.length; i += 1) grey[i] = 0.3 * data[4 * i] + 0.6 * data[4 * i + 1] + 0.1 * data[4 * i + 2];
  return { size, grey };
}
