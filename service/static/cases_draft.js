/** A table of cases as it is typed and as a request wants it. */

import { referencesOf } from "./number_draft.js";
import { entry, idOf, quantity, text } from "./typed.js";

/** Values of a number: a list, or so many evenly from one to another. */
function valuesOf(typed) {
  const [, from, to, count] = /^\s*(.+?)\s+to\s+(.+?)\s+in\s+(\d+)\s*$/.exec(typed) ?? [];
  if (from) return { from: entry(from), to: entry(to), count: Number(count) };
  return typed.split(/[,;]/).filter((value) => value.trim()).map(entry);
}

const valuesText = (values) => (Array.isArray(values) ? values.map(text).join("; ") : `${values.from} to ${values.to} in ${values.count}`);

export const textsOf = (reference, index, { cases }) => ({
  ...(cases.table === "grid" ? { values: valuesText(cases.values[index]) } : {}),
  ...(cases.table === "design" ? { low: text(cases.low[index]), high: text(cases.high[index]) } : {}),
});

/** @param {any} asked a request, or nothing */
export function ownOf({ cases = {}, numbers = [] }) {
  const list = cases.table === "list" ? [numbers.map(({ name }) => name), ...cases.rows].map((row) => row.join(",")).join("\n") : "";
  return { table: cases.table === "list" ? "csv" : cases.table ?? "grid", csv: text(cases.csv) || list, method: cases.method ?? "latin_hypercube", count: text(cases.count) || "50", seed: text(cases.seed) };
}

/** The cases of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const { numbers, own } = draft.question;
  const { table, csv, method, count, seed } = own.cases;
  const pointers = numbers.map((_, index) => `#/numbers/${index}`);
  const texts = (key) => numbers.map(({ texts: typed }) => typed[key] ?? "");
  note("#/cases", table === "csv" ? "cases-csv" : "cases-table");
  note("#/cases/csv", "cases-csv");
  for (const key of ["count", "seed", "method"]) note(`#/cases/${key}`, `cases-${key}`);
  numbers.forEach(({ id }, index) => {
    for (const key of ["values", "low", "high"]) note(`#/cases/${key}/${index}`, idOf("number", id, key));
  });
  const references = referencesOf(draft, numbers, pointers, note, () => ({}));
  const cases = {
    grid: () => ({ values: texts("values").map(valuesOf) }),
    csv: () => ({ csv: `${csv.trim()}\n` }),
    design: () => ({ method, count: quantity(count), low: texts("low").map(entry), high: texts("high").map(entry), ...(seed.trim() ? { seed: quantity(seed) } : {}) }),
  }[table]();
  return { numbers: references, cases: { table, ...cases }, limits };
}
