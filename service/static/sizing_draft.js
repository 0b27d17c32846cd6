/** The question which values of one number will do, as it is typed and as a request wants it. */

import { referencesOf } from "./number_draft.js";
import { namesOf } from "./result_draft.js";
import * as tolerances from "./tolerances_draft.js";
import { entry, idOf, quantity, text } from "./typed.js";

/** The number that is looked for comes first; the others may be off. @param {any} reference @param {number} index */
export const textsOf = (reference, index) => {
  const zone = tolerances.textsOf(reference);
  if (index > 0) return zone;
  const { low, high, spread, count } = reference;
  return { ...zone, off: zone.zone === "none" ? "" : zone.zone, low: text(low), high: text(high), spread: text(spread), count: text(count) };
};

/** @param {any} asked a request, or nothing @param {import("./result_draft.js").ResultDraft[]} results */
export function ownOf({ target, sizes = [], most_cases: most }, results) {
  return {
    aim: target ? "target" : "limits", result: results.find(({ name }) => name === target?.result)?.id ?? "",
    equals: text(target?.equals), sizes: sizes.map(text).join("; "), most: text(most),
  };
}

/** Part of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const { numbers, own } = draft.question;
  const { aim, result, equals, sizes, most } = own.sizing;
  const used = numbers.slice(0, aim === "target" ? 1 : undefined);
  note("#/number", "numbers");
  note("#/tolerances", "numbers");
  note("#/target/result", "sizing-result");
  note("#/target/equals", "sizing-equals");
  note("#/most_cases", "sizing-most");
  const typed = sizes.split(/[,;]/).filter((size) => size.trim()).map(entry);
  note("#/sizes", "sizing-sizes");
  const pointers = used.map((_, index) => (index ? `#/tolerances/${index - 1}` : "#/number"));
  const [reference, ...off] = referencesOf(draft, used, pointers, note, ({ texts }, pointer, id) => {
    const { low = "", high = "", spread, count = "", off: itself = "", zone } = texts;
    for (const [key, part] of Object.entries({ plus_minus: "plusMinus", plus: "plus", minus: "minus", relative: "relative" })) note(`${pointer}/${key}`, idOf(id, part));
    // A zone that its spread gives is none here.
    if (pointer !== "#/number") return tolerances.zoneOf({ ...texts, zone: zone === "none" ? "even" : zone });
    for (const key of ["low", "high", "spread", "count"]) note(`${pointer}/${key}`, idOf(id, key));
    return {
      low: quantity(low), high: quantity(high), ...(spread ? { spread } : {}), ...(count.trim() ? { count: quantity(count) } : {}),
      ...(itself && aim === "limits" ? tolerances.zoneOf({ ...texts, zone: itself }) : {}),
    };
  });
  const bounded = most.trim() ? { most_cases: quantity(most) } : {};
  if (aim === "target") return { number: reference, target: { result: namesOf(draft).get(result) ?? "", equals: quantity(equals) }, ...bounded };
  return { number: reference, limits, ...(off.length ? { tolerances: off } : {}), ...(typed.length ? { sizes: typed } : {}), ...bounded };
}
