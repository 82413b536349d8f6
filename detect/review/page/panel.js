// The statistics as they follow every edit: what is stale is greyed, and never shown as new.

import { on, tell } from "./bell.js";
import { byId, make } from "./elements.js";
import { drawFigure } from "./figure.js";
import { ground } from "./ground.js";
import { saving } from "./outbox.js";
import { onTheirWay, sheet } from "./sheet.js";

let shown = null; // the panel that is shown
let announced = null; // the verdict that was told last

/** Whether a panel is of the sheet as it is now. */
function isNow(panel) {
  return panel !== null && panel.generation === sheet.generation && panel.revision >= sheet.revision && !onTheirWay().length;
}

/** Takes a panel, unless a newer one has been shown already. */
function take(panel) {
  if (panel.generation !== sheet.generation) return;
  if (shown && shown.generation === panel.generation && shown.revision > panel.revision) return;
  shown = panel;
  if (panel.revision >= sheet.revision) show(panel);
  showBusy();
}

/** Greys what is stale. */
function showBusy() {
  const busy = !isNow(shown);
  byId("result").setAttribute("aria-busy", String(busy));
  byId("result").dataset.revision = shown?.revision ?? "";
  byId("working").textContent = !busy ? "" : saving.failed ? "not up to date" : "counting anew";
}

/** Shows a panel. */
function show(panel) {
  const { now, before } = panel;
  byId("no-result").textContent = panel.trouble ?? "";
  byId("no-result").hidden = !panel.trouble;
  byId("verdict").textContent = now ? upper(now.verdict) : "No verdict";
  byId("verdict").dataset.verdict = now?.verdict ?? "";
  byId("sentence").textContent = now ? reasons(now) : "";
  byId("figures").replaceChildren(...(now ? figures(now, before) : []));
  drawFigure(byId("frequencies"), panel.frequencies);
  byId("flags").replaceChildren(...(now?.flags ?? []).map((flag) => make("li", {}, flag.sentence)));
  byId("flags-box").hidden = !now?.flags.length;
  showVerdictChange(panel);
  ground.quadrats = panel.quadrats;
  byId("show-grid").disabled = panel.quadrats === null;
  tell("quadrats");
}

/** The sentence without the verdict, which stands above it. */
function reasons({ sentence, verdict }) {
  const said = `${upper(verdict)}: `;
  return sentence.startsWith(said) ? upper(sentence.slice(said.length)) : sentence;
}

/** Returns the rows of figures, each with what it was before the edits where that differs. */
function figures(now, before) {
  const interval = now.density_interval ? ` (${now.density_interval})` : "";
  const rows = [
    ["Count", now.count.toLocaleString("en"), before && before.count !== now.count ? before.count.toLocaleString("en") : null],
    ["Density", now.density + interval, null],
    ["Area", now.area, null],
    ["VMR", now.vmr, before && before.vmr !== now.vmr ? before.vmr : null],
    ["p, two-sided", bare(now.p), before && before.p !== now.p ? bare(before.p) : null],
    ["Grid", now.quadrats, null],
  ];
  return rows.flatMap(([name, value, was]) => [
    make("dt", {}, name),
    make("dd", {}, value, was === null ? null : make("small", {}, ` before: ${was}`)),
  ]);
}

/** A p without its "p =", which stands before it. */
function bare(p) {
  return p.replace(/^p\s*=?\s*/, "");
}

/** Begins a sentence with a capital. */
function upper(text) {
  return text.charAt(0).toUpperCase() + text.slice(1);
}

/** Says plainly when the edits have changed the verdict. */
function showVerdictChange(panel) {
  const said = panel.said ?? "";
  byId("verdict-change").hidden = !said;
  const key = `${sheet.id} ${said}`;
  if (key !== announced) byId("verdict-change").textContent = said;
  announced = key;
}

/** Shows what people did in sum. */
function showReview() {
  const { placed = 0, struck = 0, moved = 0, resized = 0, area_changed: area, scale_changed: scale } = sheet.review;
  const parts = [[placed, "placed"], [struck, "struck"], [moved, "moved"], [resized, "resized"]]
    .filter(([number]) => number).map(([number, word]) => `${number.toLocaleString("en")} ${word}`);
  if (area) parts.push("study area changed");
  if (scale) parts.push("scale changed");
  byId("changes").textContent = parts.length ? `Changed so far: ${parts.join(", ")}.` : "Nothing changed so far.";
}

/** Begins with another sheet. */
function clear() {
  shown = null;
  ground.quadrats = null;
  for (const id of ["verdict", "sentence", "no-result", "verdict-change"]) byId(id).textContent = "";
  byId("verdict").textContent = "Counting";
  for (const id of ["figures", "flags", "frequencies"]) byId(id).replaceChildren();
  byId("flags-box").hidden = byId("verdict-change").hidden = byId("frequencies").hidden = true;
  showBusy();
  showReview();
}

/** Begins. */
export function start() {
  on("panel", take);
  on("panel-wait", showBusy);
  on("edited", showBusy);
  on("saving", showBusy);
  on("changed", () => { showBusy(); showReview(); });
  on("opened", clear);
  on("reread", () => { showBusy(); showReview(); });
}
