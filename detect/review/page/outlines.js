// What can be said of an outline of GeoJSON: its lines, its size, and whether a place lies in it.

/** Returns all closed lines of an outline. */
export function linesOf(geometry) {
  if (!geometry) return [];
  return geometry.type === "MultiPolygon" ? geometry.coordinates.flat() : geometry.coordinates;
}

/** Returns left, top, right, bottom. */
export function boxOf(geometry) {
  let [left, top, right, bottom] = [Infinity, Infinity, -Infinity, -Infinity];
  for (const line of linesOf(geometry)) {
    for (const [x, y] of line) {
      [left, top] = [Math.min(left, x), Math.min(top, y)];
      [right, bottom] = [Math.max(right, x), Math.max(bottom, y)];
    }
  }
  return [left, top, right, bottom];
}

/** Returns a function that says whether a place lies in an outline, holes left out. */
export function holder(geometry) {
  if (!geometry) return () => true;
  const lines = linesOf(geometry);
  const [left, top, right, bottom] = boxOf(geometry);
  return (x, y) => x >= left && x <= right && y >= top && y <= bottom && lines.reduce((within, line) => within !== crosses(line, x, y), false);
}

/** Whether a line to the right of a place meets a closed line an odd number of times. */
function crosses(line, x, y) {
  let odd = false;
  for (let i = 0, j = line.length - 1; i < line.length; j = i, i += 1) {
    const [[xi, yi], [xj, yj]] = [line[i], line[j]];
    if (yi > y !== yj > y && x < ((xj - xi) * (y - yi)) / (yj - yi) + xi) odd = !odd;
  }
  return odd;
}

/** Returns the area in square pixels. */
export function sizeOf(geometry) {
  const size = (line) => Math.abs(line.slice(1).reduce((sum, [x, y], i) => sum + line[i][0] * y - x * line[i][1], 0) / 2);
  const parts = geometry.type === "MultiPolygon" ? geometry.coordinates : [geometry.coordinates];
  return parts.reduce((sum, [outer, ...holes]) => sum + size(outer) - holes.reduce((all, hole) => all + size(hole), 0), 0);
}

/** Returns an outline with every place of it changed. */
export function changed(geometry, change) {
  const line = (places) => places.map(([x, y]) => change(x, y));
  const { type, coordinates } = geometry;
  return { type, coordinates: type === "MultiPolygon" ? coordinates.map((part) => part.map(line)) : coordinates.map(line) };
}
