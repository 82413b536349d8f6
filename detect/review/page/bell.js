// Who wants to hear of what: modules tell each other news without knowing each other.

const listeners = new Map();

/** Calls `hear` whenever there is news of this name. */
export function on(name, hear) {
  if (!listeners.has(name)) listeners.set(name, []);
  listeners.get(name).push(hear);
}

/** Tells all who listen. */
export function tell(name, news) {
  for (const hear of listeners.get(name) ?? []) hear(news);
}
