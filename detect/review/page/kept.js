// What this browser keeps for the page, so that a closed tab loses nothing.

/** A number that tells one review from another on the same port, without giving the secret away. */
function mark(text) {
  let [a, b] = [0x9e3779b9, 0x85ebca6b];
  for (const letter of text) {
    a = Math.imul(a ^ letter.charCodeAt(0), 0x01000193);
    b = Math.imul(b + letter.charCodeAt(0), 0xc2b2ae35) ^ (b >>> 15);
  }
  return ((a >>> 0).toString(16) + (b >>> 0).toString(16)).padStart(16, "0");
}

const OWN = `strewn ${mark(location.pathname)} `;

/** Keeps plain values; says whether the browser has room for them. */
export function keep(name, values) {
  try {
    localStorage.setItem(OWN + name, JSON.stringify(values));
    return true;
  } catch {
    return false;
  }
}

/** Returns what was kept, or something else where nothing is. */
export function kept(name, otherwise = null) {
  try {
    return JSON.parse(localStorage.getItem(OWN + name)) ?? otherwise;
  } catch {
    return otherwise;
  }
}

/** Keeps it no longer. */
export function forget(name) {
  try {
    localStorage.removeItem(OWN + name);
  } catch {
    // Where nothing can be kept, there is nothing to forget.
  }
}

/** Returns all names under which something is kept that begin like this, in order. */
export function names(beginning) {
  try {
    return Object.keys(localStorage)
      .filter((name) => name.startsWith(OWN + beginning))
      .map((name) => name.slice(OWN.length))
      .sort();
  } catch {
    return [];
  }
}
