// What the person has in hand: the tool, a drag that goes on, and the cross that the arrow keys move.

/** The tool in hand, the drag that goes on (by pointer or by cross), and where the cross is. */
export const hand = { tool: null, drag: null, cross: { shown: false, x: 0, y: 0 } };

/** Ends a drag without doing anything; says whether there was one. */
export function letGo() {
  const { drag } = hand;
  hand.drag = null;
  drag?.cancel?.();
  return drag !== null;
}
