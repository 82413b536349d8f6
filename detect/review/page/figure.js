// The small figure: in how many quadrats 0, 1, 2, ... spots lie (bars), and how many chance expects (line).

import { draw } from "./elements.js";

const [WIDTH, HEIGHT, LEFT, TOP, BOTTOM] = [300, 128, 26, 8, 34];

/** Draws the figure into an element, or leaves it empty where there is nothing to draw. */
export function drawFigure(place, frequencies) {
  place.hidden = frequencies === null;
  if (frequencies === null) return place.replaceChildren();
  const { labels, observed, expected } = frequencies;
  const most = Math.max(1, ...observed, ...expected);
  const step = (WIDTH - LEFT - 4) / labels.length;
  const height = (value) => ((HEIGHT - TOP - BOTTOM) * value) / most;
  const base = HEIGHT - BOTTOM;
  const middle = (index) => LEFT + (index + 0.5) * step;
  const bars = observed.map((value, index) => draw("rect", {
    x: middle(index) - 0.36 * step, y: base - height(value), width: 0.72 * step, height: height(value), class: "bar",
  }));
  const points = expected.map((value, index) => `${middle(index).toFixed(1)},${(base - height(value)).toFixed(1)}`);
  const dots = points.map((point) => draw("circle", { cx: point.split(",")[0], cy: point.split(",")[1], r: 2.6, class: "dot" }));
  const every = Math.ceil(labels.length / 12);
  const words = labels.map((label, index) => (index % every ? null : draw("text", { x: middle(index), y: base + 12, class: "label" }, label.replace(" or more", "+"))));
  place.replaceChildren(draw(
    "svg", { viewBox: `0 0 ${WIDTH} ${HEIGHT}`, role: "img", "aria-label": spoken(frequencies) },
    draw("text", { x: LEFT - 4, y: TOP + 8, class: "label end" }, String(Math.round(most))),
    draw("line", { x1: LEFT, y1: base, x2: WIDTH - 4, y2: base, class: "axis" }),
    ...bars, draw("polyline", { points: points.join(" "), class: "line" }), ...dots, ...words,
    draw("text", { x: (WIDTH + LEFT) / 2, y: HEIGHT - 4, class: "label" }, "spots in a whole quadrat: bars seen, line by chance"),
  ));
}

/** Says the figure in words. */
function spoken({ labels, observed, expected }) {
  const parts = labels.map((label, index) => `${label}: ${observed[index]} seen, ${expected[index].toFixed(1)} by chance`);
  return `Whole quadrats by the number of spots in them. ${parts.join("; ")}.`;
}
