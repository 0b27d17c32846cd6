/** The question which values of one number will do, as it is typed and as a request wants it. */

import { referencesOf } from "./number_draft.js";
import { namesOf } from "./result_draft.js";
import { entry, idOf, quantity, text } from "./typed.js";

export const textsOf = ({ low, high, spread, count }) => ({ low: text(low), high: text(high), spread: text(spread), count: text(count) });

/** @param {any} asked a request, or nothing @param {import("./result_draft.js").ResultDraft[]} results */
export function ownOf({ target, sizes = [] }, results) {
  return {
    aim: target ? "target" : "limits", result: results.find(({ name }) => name === target?.result)?.id ?? "",
    equals: text(target?.equals), sizes: sizes.map(text).join("; "),
  };
}

/** Part of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const [number] = draft.question.numbers;
  const { aim, result, equals, sizes } = draft.question.own.sizing;
  note("#/number", "numbers");
  note("#/target/result", "sizing-result");
  note("#/target/equals", "sizing-equals");
  const typed = sizes.split(/[,;]/).filter((size) => size.trim()).map(entry);
  note("#/sizes", "sizing-sizes");
  const [reference] = number ? referencesOf(draft, [number], ["#/number"], note, (one, pointer, id) => {
    for (const key of ["low", "high", "spread", "count"]) note(`${pointer}/${key}`, idOf(id, key));
    const { low = "", high = "", spread, count = "" } = one.texts;
    return { low: quantity(low), high: quantity(high), ...(spread ? { spread } : {}), ...(count.trim() ? { count: quantity(count) } : {}) };
  }) : [];
  if (aim === "target") return { number: reference, target: { result: namesOf(draft).get(result) ?? "", equals: quantity(equals) } };
  return { number: reference, limits, ...(typed.length ? { sizes: typed } : {}) };
}
