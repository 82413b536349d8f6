// What can be undone and done again: it follows from the history alone, so a reload changes nothing.

/** Returns the edits of one person that can be undone and done again, the next one last. */
export function stacks(history, who) {
  const [undoable, redoable] = [[], []];
  const standing = new Map();
  for (const { id, what, of, who: by } of history) {
    if (what === "undo" || what === "redo") {
      standing.set(of, what === "redo");
      if (by === who) shift(of, what === "undo" ? undoable : redoable, what === "undo" ? redoable : undoable);
      continue;
    }
    standing.set(id, true);
    if (by !== who) continue;
    undoable.push(id);
    redoable.length = 0;
  }
  return {
    undoable: undoable.filter((id) => standing.get(id)),
    redoable: redoable.filter((id) => !standing.get(id)),
  };
}

/** Moves an id from one stack to the other. */
function shift(id, from, to) {
  const at = from.lastIndexOf(id);
  if (at < 0) return;
  from.splice(at, 1);
  to.push(id);
}

/** Returns those of some edits that later ones among them have not undone. */
export function standing(edits) {
  const off = new Set();
  for (const { what, of } of edits) {
    if (what === "undo") off.add(of);
    if (what === "redo") off.delete(of);
  }
  return edits.filter((edit) => edit.what !== "undo" && edit.what !== "redo" && !off.has(edit.id));
}
