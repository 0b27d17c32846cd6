/** Pads of an answer: how hot each gets, as a table. */

import { make, scrolled } from "./elements.js";
import { bounded, brief, pretty, shown } from "./numbers.js";

/** What to call a pad: its name, or its face and number. */
export const padName = ({ name, face, patch }) => name ?? (patch === undefined ? face : `${face}, pad ${patch + 1}`);

const potentialCell = ({ value, error_bound: bound }, where = null) => make("td", {},
  shown(value, bound), make("span", { class: "known" }, bound > 0 ? `\u00b1 ${bounded(bound)}` : "exact"),
  where ? make("span", { class: "known" }, where) : null);

const flowWords = ({ value, error_bound: bound }, unit) =>
  (value === null ? "flow without finite value" : `${shown(value, bound)} ${unit} in${bound > 1e-9 * Math.abs(value) ? `, \u00b1 ${bounded(bound)}` : ""}`);

/** @param {any} answer of POST /v1/pads */
export function padsView({ pads, units }, words) {
  const place = ({ at }, face) => ["x", "y", "z"].flatMap((axis, index) => (axis === face[0] ? [] : [`${axis} ${brief(at[index])}`])).join(", ");
  const [potential, length] = [pretty(units.potential), pretty(units.length)];
  const heads = ["Pad", `Mean, ${potential}`, `Largest, ${potential}`, `Centre, ${potential}`];
  return scrolled(
    make(
      "table", { class: "numbers pads" },
      make("caption", {}, `${words.potential} of each pad; the largest with its place in ${length}`),
      make("thead", {}, make("tr", {}, heads.map((head) => make("th", { scope: "col" }, head)))),
      make("tbody", {}, pads.map((pad) => make("tr", {},
        make("th", { scope: "row" }, padName(pad),
          make("span", { class: "known" }, `on ${pad.face}, ${brief(pad.area)} ${length}\u00b2`),
          make("span", { class: "known" }, flowWords(pad.flow, pretty(units.flow)))),
        potentialCell(pad.mean), potentialCell(pad.largest, place(pad.largest, pad.face)), potentialCell(pad.centre)))),
    ),
    "Pads",
  );
}
