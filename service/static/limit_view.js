/** Whether limits hold, and by how much. */

import { make, verdict } from "./elements.js";
import { bounded, pretty, shown } from "./numbers.js";
import { differenceOf, headed, heldWord, limitWords, placeWords, rowHead, table, valueCell, withUnit } from "./tables.js";

/** @param {any} answer of POST /v1/limits */
export function limitsView({ results, limits, all_held: allHeld, units }) {
  const unitOf = (name) => results.find((result) => result.name === name).unit;
  const rows = limits.map((limit) => {
    const result = results.find(({ name }) => name === limit.result);
    const difference = differenceOf(result.unit, units);
    const asked = limitWords(limit, unitOf(limit.result));
    return [
      rowHead(limit.name ?? limit.result, limit.name ? `${limit.result} ${asked}` : asked),
      make("td", {}, withUnit(shown(result.value, result.error_bound ?? 0), result.unit), boundLine(result.error_bound, difference), placeLine(result, units)),
      make("td", {}, heldWord(limit.held), make("span", { class: "margin" }, `by ${withUnit(shown(Math.abs(limit.margin), limit.error_bound ?? 0), difference)}`), boundLine(limit.error_bound, difference)),
    ];
  });
  if (!limits.length) return [resultsTable(results, units, "Each result with its bound")];
  return [allView(allHeld, limits), table("Each result as it stands, and its margin to the limit", ["Limit", "Result", "Margin"], rows, "limits"),
    otherResults(results, limits, units)].filter(Boolean);
}

const boundLine = (bound, unit) => make("span", { class: "known" }, bound === null ? "bound not known" : bound > 0 ? `\u00b1 ${bounded(bound)} ${pretty(unit)}` : "exact");

/** Where the highest or lowest place is. */
const placeLine = (result, units) => (result.at ? make("span", { class: "known" }, placeWords(result, units)) : null);

function allView(held, limits) {
  const count = limits.filter((limit) => limit.held === "no").length;
  if (held === "yes") return verdict("good", "All limits hold", "Every margin is larger than the error of its result, so no error turns one over.");
  if (held === "no") return verdict("bad", count === 1 ? "One limit does not hold" : `${count} limits do not hold`, "That is certain: the results are off by more than their errors.");
  return verdict("open", "Undecided", "A margin is smaller than the error of its result. Ask for a smaller largest error.");
}

/** Results without a limit. */
function otherResults(results, limits, units) {
  const rest = results.filter(({ name }) => limits.every(({ result }) => result !== name));
  return rest.length ? resultsTable(rest, units, "Results without a limit") : null;
}

/** Results as the problem stands. */
export const resultsTable = (results, units, caption = "Results as the problem stands") => table(
  caption, ["Result", "Value"],
  results.map((result) => [rowHead(headed(result.name, result.unit), placeWords(result, units)), valueCell(result.value, result.error_bound)]),
);
