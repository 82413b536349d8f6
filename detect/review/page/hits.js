// Which ring lies under a point: a grid of buckets, so that many spots cost no more than few.

import { holder } from "./outlines.js";

const CELL = 48; // pixels of the photograph

/** Rows of spots by the cell that their centre lies in. */
export class Buckets {
  constructor() {
    this.cells = new Map();
    this.largest = 0;
  }

  /** Puts a spot in. */
  add(row, x, y, radius) {
    const key = cell(x, y);
    const rows = this.cells.get(key);
    if (rows) rows.push(row);
    else this.cells.set(key, [row]);
    if (radius > this.largest) this.largest = radius;
  }

  /** Takes a spot out. */
  take(row, x, y) {
    const rows = this.cells.get(cell(x, y));
    const at = rows?.indexOf(row) ?? -1;
    if (at >= 0) rows.splice(at, 1);
  }

  /** Calls `see` with every row whose centre may lie in a rectangle. */
  within(x0, y0, x1, y1, see) {
    const [c0, c1] = [Math.floor(x0 / CELL), Math.floor(x1 / CELL)];
    const [r0, r1] = [Math.floor(y0 / CELL), Math.floor(y1 / CELL)];
    if ((c1 - c0 + 1) * (r1 - r0 + 1) > this.cells.size) {
      for (const rows of this.cells.values()) rows.forEach(see);
      return;
    }
    for (let r = r0; r <= r1; r += 1) {
      for (let c = c0; c <= c1; c += 1) this.cells.get(c + 65536 * r)?.forEach(see);
    }
  }
}

/** The key of the cell that a place lies in. */
function cell(x, y) {
  return Math.floor(x / CELL) + 65536 * Math.floor(y / CELL);
}

/**
 * Returns the row of the ring at a place, or -1. Counted ones win over struck ones, then the one
 * whose middle is nearest for its size.
 */
export function ringAt(spots, x, y, slop) {
  const reach = spots.buckets.largest + slop;
  let [best, least] = [-1, Infinity];
  spots.buckets.within(x - reach, y - reach, x + reach, y + reach, (row) => {
    const share = Math.hypot(spots.x[row] - x, spots.y[row] - y) / (spots.radius[row] + slop);
    if (share > 1) return;
    const rank = spots.counted[row] ? share : share + 1;
    if (rank < least) [best, least] = [row, rank];
  });
  return best;
}

/** Returns the counted rows whose centre lies inside a loop of places. */
export function inside(spots, loop) {
  const xs = loop.map((place) => place[0]);
  const ys = loop.map((place) => place[1]);
  const box = [Math.min(...xs), Math.min(...ys), Math.max(...xs), Math.max(...ys)];
  const holds = holder({ type: "Polygon", coordinates: [loop] });
  const rows = [];
  spots.buckets.within(...box, (row) => {
    if (spots.counted[row] && holds(spots.x[row], spots.y[row])) rows.push(row);
  });
  return rows;
}
