/** The fields of a table of cases. */

import { choice, field, longText, writer } from "./elements.js";
import { numberText } from "./number_form.js";

export const mostNumbers = () => 100;

export const fieldsOfNumber = (draft) => (number, id, spoken, changed) => {
  const kind = `number-${number.id}`;
  const { table } = draft.question.own.cases;
  const text = (key, label, more) => numberText(number, id, spoken, changed, key, label, { kind, ...more });
  if (table === "grid") return [text("values", "Values", { extraClass: "whole", hint: "Such as 10; 12; 15, or 10 to 20 in 11 for eleven even ones." })];
  return table === "design" ? [text("low", "From"), text("high", "To")] : [];
};

export function ownFields(draft, changed, again) {
  const own = draft.question.own.cases;
  const text = (key, label, more = {}) => field({ id: `cases-${key}`, label, value: own[key], onInput: writer(own, key, changed), ...more });
  const table = choice({
    id: "cases-table", label: "Cases", value: own.table, extraClass: "whole",
    options: [["grid", "every combination of values"], ["design", "spread over ranges"], ["csv", "a table of your own"]],
    onChange: (value) => {
      own.table = value;
      again("cases-table");
    },
  });
  if (own.table === "csv") {
    return [table, longText({
      id: "cases-csv", label: "Table", value: own.csv, onInput: writer(own, "csv", changed),
      hint: "First row: the names of the numbers; then a case a row, bare numbers in their units.",
    })];
  }
  if (own.table === "grid") return [table];
  return [
    table,
    choice({
      id: "cases-method", label: "How", value: own.method, onChange: writer(own, "method", changed),
      options: [["latin_hypercube", "Latin hypercube"], ["sobol", "Sobol sequence"], ["random", "even chance"]],
    }),
    text("count", "How many"), text("seed", "Seed (optional)", { hint: "The same seed gives the same cases." }),
  ];
}
