// How the photograph is looked at: brightness, contrast, channel, and which layers are shown. Changes nothing.

import { tell } from "./bell.js";
import { byId } from "./elements.js";
import { keep, kept } from "./kept.js";

/** Which layers are shown; `rings` off hides all marks. */
export const layers = { rings: true, struck: true, area: true, grid: false };

const usual = { brightness: 1, contrast: 1, channel: "all" };
const look = { ...usual };

/** Begins: the controls do what they say. */
export function start() {
  Object.assign(layers, kept("layers", {}), { rings: true });
  for (const name of ["struck", "area", "grid"]) {
    const box = byId(`show-${name}`);
    box.checked = layers[name];
    box.addEventListener("change", () => showLayer(name, box.checked));
  }
  for (const name of ["brightness", "contrast"]) {
    byId(name).addEventListener("input", (event) => lookWith({ [name]: Number(event.target.value) }));
  }
  byId("channel").addEventListener("change", (event) => lookWith({ channel: event.target.value }));
  byId("look-usual").addEventListener("click", () => lookWith(usual));
}

/** Shows or hides a layer. */
export function showLayer(name, shown = !layers[name]) {
  layers[name] = shown;
  if (name !== "rings") {
    byId(`show-${name}`).checked = shown;
    const { struck, area, grid } = layers;
    keep("layers", { struck, area, grid });
  }
  tell("layers");
}

/** Changes how the photograph is looked at. */
function lookWith(changed) {
  Object.assign(look, changed);
  byId("brightness").value = look.brightness;
  byId("contrast").value = look.contrast;
  byId("channel").value = look.channel;
  const parts = [];
  if (look.channel !== "all") parts.push(`url(#channel-${look.channel})`);
  if (look.brightness !== 1) parts.push(`brightness(${look.brightness})`);
  if (look.contrast !== 1) parts.push(`contrast(${look.contrast})`);
  for (const id of ["layer-photograph", "loupe-photograph"]) byId(id).style.filter = parts.join(" ") || "none";
}
