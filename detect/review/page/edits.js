// What an edit does to a spot, so that it is seen before the server has answered.

const sets = new WeakMap();

/** Returns the spots that an edit brings into being. */
export function broughtBy(edit) {
  if (edit.what === "place") return [edit];
  return edit.parts ?? (edit.into ? [edit.into] : []);
}

/** Returns the ids of the spots that an edit needs. */
export function needed(edit) {
  if (edit.what === "place" || edit.what === "note") return [];
  return edit.spots ?? (edit.spot == null ? [] : [edit.spot]);
}

/** Returns the ids of all spots that an edit is about. */
export function touched(edit) {
  return [...needed(edit), ...broughtBy(edit).map((each) => each.spot)];
}

/** Whether an edit is about a spot. */
export function touches(edit, id) {
  if (!sets.has(edit)) sets.set(edit, new Set(touched(edit)));
  return sets.get(edit).has(id);
}

/** Returns a spot as it is after an edit that touches it; null where there is none. */
export function after(spot, id, edit) {
  const fresh = broughtBy(edit).find((each) => each.spot === id);
  if (fresh) {
    const { x, y, radius } = fresh;
    return { id, x, y, radius, doubt: 0, found: false, counted: true, changed: "placed" };
  }
  if (spot === null) return null;
  switch (edit.what) {
    case "restore": return { ...spot, counted: true, changed: spot.found ? null : "placed" };
    case "move": return { ...spot, x: edit.x, y: edit.y, changed: spot.changed ?? "moved" };
    case "resize": return { ...spot, radius: edit.radius, changed: spot.changed ?? "resized" };
    default: return { ...spot, counted: false, changed: "struck" };
  }
}

/** Says in words what was done, for undo and for those who listen. */
export function inWords(what) {
  return {
    place: "placing a spot", strike: "striking", restore: "restoring", move: "moving a spot", resize: "resizing a spot",
    split: "splitting a spot", merge: "merging two spots", set_area: "the new study area", set_scale: "the new scale",
    note: "a note", checked: "marking as checked", unchecked: "taking the mark away",
  }[what] ?? what;
}
