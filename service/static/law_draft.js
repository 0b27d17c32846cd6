/** How the conductivity varies with the potential, as it is typed and as a request wants it. */

import { entry, idOf, quantity, text } from "./typed.js";

/**
 * @typedef {object} LawDraft
 * @property {"none"|"linear"|"conductivities"|"factors"} kind
 * @property {string} reference potential at which the conductivity has its given value
 * @property {string} perDegree part of it gained per unit of potential
 * @property {string} table a line for each entry: potential, and conductivity or factor
 */

/** @returns {LawDraft} */
export function lawDraftOf(law) {
  const draft = { kind: "none", reference: "", perDegree: "", table: "" };
  if (!law) return draft;
  if (law.law === "linear") return { ...draft, kind: "linear", reference: text(law.reference), perDegree: text(law.per_degree) };
  const entries = law.factor ?? law.conductivity;
  return {
    ...draft, kind: law.factor ? "factors" : "conductivities",
    table: law.potential.map((potential, index) => `${potential}, ${entries[index]}`).join("\n"),
  };
}

/** The two columns of a table; a space separates them where nothing else does. */
function columnsOf(table) {
  const rows = table.split("\n").filter((line) => line.trim())
    .map((line) => line.split(/[,;\t]/.test(line) ? /[,;\t]/ : /\s+(?=\S+\s*$)/));
  return [rows.map(([potential]) => entry(potential)), rows.map(([, value = ""]) => entry(value))];
}

/** The law of a request, each place of which is noted with its field; nothing where there is none. @param {LawDraft} law */
export function lawOf(law, note) {
  const pointer = "#/problem/body/conductivity_law";
  if (law.kind === "none") return undefined;
  if (law.kind === "linear") {
    note(pointer, idOf("law", "reference"));
    note(`${pointer}/reference`, idOf("law", "reference"));
    note(`${pointer}/per_degree`, idOf("law", "per-degree"));
    return { law: "linear", reference: quantity(law.reference), per_degree: quantity(law.perDegree) };
  }
  note(pointer, idOf("law", "table"));
  const [potential, entries] = columnsOf(law.table);
  return { law: "table", potential, [law.kind === "factors" ? "factor" : "conductivity"]: entries };
}
