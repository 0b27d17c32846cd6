/** Pads of an answer: how hot each gets, as a table. */

import { make, scrolled } from "./elements.js";
import { bounded, brief, greatest, placed, pretty, shown } from "./numbers.js";

/** What to call a pad: its name, or its face and number. */
export const padName = ({ name, face, patch }) => name ?? (patch === undefined ? face : `${face}, pad ${patch + 1}`);

const potentialCell = ({ value, error_bound: bound }, where = null) => make("td", {},
  shown(value, bound), make("span", { class: "known" }, bound > 0 ? `\u00b1 ${bounded(bound)}` : "exact"),
  where ? make("span", { class: "known" }, where) : null);

const flowWords = ({ value, error_bound: bound }, unit) =>
  (value === null ? "flow without finite value" : `${shown(value, bound)} ${unit} in${bound > 1e-9 * Math.abs(value) ? `, \u00b1 ${bounded(bound)}` : ""}`);

/** The pads that reach the highest potential, as far as the bounds tell: most often one. */
function highestOf(pads) {
  if (pads.length < 2) return [];
  const sure = Math.max(...pads.map(({ largest }) => largest.value - largest.error_bound));
  return pads.filter(({ largest }) => largest.value + largest.error_bound >= sure);
}

/** @param {any} answer of POST /v1/pads */
export function padsView({ pads, units }, words) {
  const scale = greatest(pads.flatMap(({ rectangle }) => Object.values(rectangle).flat()));
  const place = ({ at }, face) => ["x", "y", "z"].flatMap((axis, index) => (axis === face[0] ? [] : [`${axis} ${placed(at[index], scale)}`])).join(", ");
  const [potential, length] = [pretty(units.potential), pretty(units.length)];
  const heads = ["Pad", `Mean, ${potential}`, `Largest, ${potential}`, `Centre, ${potential}`];
  const highest = highestOf(pads);
  const mark = highest.length > 1 ? "\u25b3 among the highest of all pads" : "\u25b3 highest of all pads";
  return scrolled(
    make(
      "table", { class: "numbers pads" },
      make("caption", {}, `${words.potential} of each pad; the largest with its place in ${length}`),
      make("thead", {}, make("tr", {}, heads.map((head) => make("th", { scope: "col" }, head)))),
      make("tbody", {}, pads.map((pad) => make("tr", { class: highest.includes(pad) ? "highest" : null },
        make("th", { scope: "row" }, padName(pad),
          highest.includes(pad) ? make("span", { class: "known mark" }, mark) : null,
          make("span", { class: "known" }, `on ${pad.face}, ${brief(pad.area)} ${length}\u00b2`),
          make("span", { class: "known" }, flowWords(pad.flow, pretty(units.flow)))),
        potentialCell(pad.mean), potentialCell(pad.largest, place(pad.largest, pad.face)), potentialCell(pad.centre)))),
    ),
    "Pads",
  );
}
