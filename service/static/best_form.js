/** The fields of best values: ranges of the numbers, what is best, and what has to keep apart. */

import { rectanglesOf } from "./catalogue.js";
import { choice, field, make, writer } from "./elements.js";
import { listTicks } from "./lists.js";
import { numberText } from "./number_form.js";
import { problemOf } from "./problem_draft.js";
import { namesOf } from "./result_draft.js";

export const mostNumbers = () => 20;

export const fieldsOfNumber = () => (number, id, spoken, changed) => {
  const kind = `number-${number.id}`;
  return [numberText(number, id, spoken, changed, "low", "From", { kind }), numberText(number, id, spoken, changed, "high", "to", { kind })];
};

export function ownFields(draft, changed) {
  const own = draft.question.own["best-values"];
  const text = (key, label, more = {}) => field({ id: `best-${key}`, label, value: own[key], onInput: writer(own, key, changed), ...more });
  return [
    choice({
      id: "best-sense", label: "Best is", value: own.sense, extraClass: "whole", onChange: writer(own, "sense", changed),
      options: [["minimise", "the largest of these as low as can be"], ["maximise", "the least of these as high as can be"]],
    }),
    listTicks({
      id: "best-goal", label: "These results", ticked: own.goal, entriesOf: () => [...namesOf(draft)], onChange: writer(own, "goal", changed),
      nothing: "No result is named yet.", hint: "All limits have to hold as well.",
    }),
    listTicks({
      id: "best-apart", label: "Keep these apart (optional)", ticked: own.apart, entriesOf: () => rectanglesOf(problemOf(draft, () => {})), onChange: writer(own, "apart", changed),
      nothing: "There are no patches, pads or boxes.",
    }),
    text("gap", "Least gap between them", { kind: "length" }),
    make("details", { class: "whole" }, make("summary", {}, "How long to search"), make("div", { class: "fields" },
      text("starts", "Searches (optional)", { hint: "Usual: 3." }), text("mostCases", "Cases at most (optional)", { hint: "Usual: 1000." }), text("seed", "Seed (optional)"))),
  ];
}
