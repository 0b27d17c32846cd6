/** The part of the form for a conductivity that varies with the potential. */

import { choice, field, longText, make, writer } from "./elements.js";
import { PHYSICS } from "./words.js";

/**
 * @param {any} draft
 * @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 */
export function lawFields(draft, changed, redraw) {
  const { law } = draft;
  const words = PHYSICS[draft.potential];
  const potential = words.potential.toLowerCase();
  const kind = choice({
    id: "law-kind", label: `With the ${potential} the conductivity`, value: law.kind, extraClass: "whole",
    options: [
      ["none", "stays the same"], ["linear", "changes linearly"], ["conductivities", "follows a table"],
      ["factors", "follows a table of factors on it"],
    ],
    onChange: (value) => {
      law.kind = value;
      changed();
      redraw("body");
      document.getElementById("law-kind").focus();
    },
  });
  if (law.kind === "none") return [kind];
  if (law.kind === "linear") {
    return [
      kind,
      field({
        id: "law-reference", label: `As given at a ${potential} of`, kind: "potential", value: law.reference,
        onInput: writer(law, "reference", changed),
      }),
      field({
        id: "law-per-degree", label: "Part gained per unit", kind: "per_difference", value: law.perDegree,
        onInput: writer(law, "perDegree", changed),
      }),
      make("p", { class: "hint whole" }, "Negative where it falls: \u22120.0004 loses 4 parts in ten thousand for each unit."),
    ];
  }
  const isFactor = law.kind === "factors";
  return [
    kind,
    longText({
      id: "law-table", label: `${words.potential} and ${isFactor ? "factor" : "conductivity"}`, value: law.table, rows: 4,
      hint: `A line for each, such as ${isFactor ? "600, 1.21" : "600, 1.7"}; linear between them. They have to cover every ${potential} in the body.`,
      onInput: writer(law, "table", changed),
    }),
  ];
}
