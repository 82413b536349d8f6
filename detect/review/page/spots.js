// The spots of a photograph as they are shown now, in columns; a row once given stays.

import { Buckets } from "./hits.js";

export class Spots {
  /** Takes the columns that the server sends. */
  constructor(columns = { id: [], x: [], y: [], radius: [], doubt: [], found: [], counted: [], changed: [] }) {
    Object.assign(this, columns);
    this.here = this.id.map(() => true);
    this.rows = new Map(this.id.map((id, row) => [id, row]));
    this.buckets = new Buckets();
    this.id.forEach((_, row) => this.buckets.add(row, this.x[row], this.y[row], this.radius[row]));
    this.drawn = new Map(); // where spots were when they were drawn last, of those changed since
    this.inside = [];
    this.lieIn(() => true);
  }

  get length() {
    return this.id.length;
  }

  /** Says which places lie in the study area; `total` counts there. */
  lieIn(holds) {
    this.holds = holds;
    this.total = 0;
    for (let row = 0; row < this.length; row += 1) {
      this.inside[row] = holds(this.x[row], this.y[row]);
      this.total += this.here[row] && this.counted[row] && this.inside[row] ? 1 : 0;
    }
  }

  /** Returns what is known of one spot, or null. */
  get(id) {
    const row = this.rows.get(id);
    if (row === undefined || !this.here[row]) return null;
    return this.at(row);
  }

  /** Returns what is known of the spot in a row. */
  at(row) {
    return {
      id: this.id[row], x: this.x[row], y: this.y[row], radius: this.radius[row], doubt: this.doubt[row],
      found: this.found[row], counted: this.counted[row], changed: this.changed[row],
    };
  }

  /** Adds a spot or changes it; null takes it away. */
  set(id, spot) {
    const row = this.rows.get(id) ?? this.id.length;
    if (this.here[row]) {
      if (!this.drawn.has(id)) this.drawn.set(id, { x: this.x[row], y: this.y[row], radius: this.radius[row] });
      this.buckets.take(row, this.x[row], this.y[row]);
      this.total -= this.counted[row] && this.inside[row] ? 1 : 0;
    }
    if (spot === null) {
      if (row < this.id.length) this.here[row] = this.counted[row] = false;
      return;
    }
    this.rows.set(id, row);
    for (const name of ["id", "x", "y", "radius", "doubt", "found", "counted", "changed"]) this[name][row] = spot[name];
    this.here[row] = true;
    this.buckets.add(row, spot.x, spot.y, spot.radius);
    this.inside[row] = this.holds(spot.x, spot.y);
    this.total += spot.counted && this.inside[row] ? 1 : 0;
  }
}
