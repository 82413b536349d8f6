// How a piece of the page is made. Text goes in as text, never as markup.

const SVG = "http://www.w3.org/2000/svg";

/** Returns the element of the page with this id. */
export function byId(id) {
  return document.getElementById(id);
}

/** Makes an element with attributes and contents (elements, or texts). */
export function make(name, attributes = {}, ...contents) {
  return filled(document.createElement(name), attributes, contents);
}

/** Makes an element of a drawing. */
export function draw(name, attributes = {}, ...contents) {
  return filled(document.createElementNS(SVG, name), attributes, contents);
}

/** Makes a button with words on it that does something. */
export function button(words, act, attributes = {}) {
  const made = make("button", { type: "button", ...attributes }, words);
  made.addEventListener("click", act);
  return made;
}

/** Puts attributes and contents into an element. */
function filled(element, attributes, contents) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value === true) element.setAttribute(name, "");
    else if (value !== false && value != null) element.setAttribute(name, value);
  }
  element.append(...contents.filter((each) => each != null));
  return element;
}

/** Says "1 spot" or "3 spots". */
export function counted(number, one, many = `${one}s`) {
  return `${number.toLocaleString("en")} ${number === 1 ? one : many}`;
}

/** Says when something was, in the reader's own clock. */
export function clock(iso) {
  const time = new Date(iso);
  if (Number.isNaN(time.getTime())) return iso;
  return time.toLocaleString("en-GB", { day: "numeric", month: "short", hour: "2-digit", minute: "2-digit" });
}
