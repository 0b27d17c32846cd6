/** The question which values of a few numbers are best, as it is typed and as a request wants it. */

import { referencesOf } from "./number_draft.js";
import { namesOf } from "./result_draft.js";
import { idOf, quantity, text } from "./typed.js";

export const textsOf = ({ low, high }) => ({ low: text(low), high: text(high) });

/** @param {any} asked a request, or nothing @param {import("./result_draft.js").ResultDraft[]} results */
export function ownOf({ goal = {}, apart: [apart] = [], starts, most_cases: mostCases, seed }, results) {
  const names = goal.minimise ?? goal.maximise ?? [];
  return {
    sense: goal.maximise ? "maximise" : "minimise", goal: results.filter(({ name }) => names.includes(name)).map(({ id }) => id),
    apart: apart?.rectangles ?? [], gap: text(apart?.gap), starts: text(starts), mostCases: text(mostCases), seed: text(seed),
  };
}

/** Part of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const { numbers, own } = draft.question;
  const { sense, goal, apart, gap, starts, mostCases, seed } = own["best-values"];
  const names = namesOf(draft);
  for (const [key, id] of [["goal", "best-goal"], ["apart", "best-apart"], ["apart/0/gap", "best-gap"], ["starts", "best-starts"], ["most_cases", "best-mostCases"], ["seed", "best-seed"]]) {
    note(`#/${key}`, id);
  }
  const references = referencesOf(draft, numbers, numbers.map((_, index) => `#/numbers/${index}`), note, ({ texts }, pointer, id) => {
    for (const key of ["low", "high"]) note(`${pointer}/${key}`, idOf(id, key));
    return { low: quantity(texts.low ?? ""), high: quantity(texts.high ?? "") };
  });
  const optional = (key, typed) => (typed.trim() ? { [key]: quantity(typed) } : {});
  return {
    numbers: references, goal: { [sense]: goal.filter((id) => names.has(id)).map((id) => names.get(id)) }, limits,
    ...(apart.length ? { apart: [{ rectangles: apart, ...optional("gap", gap) }] } : {}),
    ...optional("starts", starts), ...optional("most_cases", mostCases), ...optional("seed", seed),
  };
}
