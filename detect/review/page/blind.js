// Whether what was detected must not be seen, as while quadrats of a spot check are marked.

/** `on` while nothing detected is shown or told; `keys` are those that act meanwhile. */
export const blind = { on: false, keys: [], undo: () => {} };
