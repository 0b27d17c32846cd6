/** The fields of tolerances: a zone and a spread for each number, and the samples. */

import { choice, field, longText, writer } from "./elements.js";
import { numberText } from "./number_form.js";
import { WITH_DEVIATION } from "./tolerances_draft.js";
import { idOf } from "./typed.js";

export const mostNumbers = () => 100;

export const fieldsOfNumber = () => (number, id, spoken, changed, again) => {
  const { texts } = number;
  const kind = `step-${number.id}`;
  const text = (key, label, more) => numberText(number, id, spoken, changed, key, label, more);
  const pick = (key, label, options, value, extraClass = "") => choice({
    id: idOf(id, key), label, spoken, value, options, extraClass,
    onChange: (chosen) => {
      texts[key] = chosen;
      again(idOf(id, key));
    },
  });
  const zone = texts.zone || "even";
  const shape = texts.shape ?? "";
  return [
    pick("zone", "Tolerance", [["even", "to either side"], ["sides", "up and down"], ["relative", "in parts of it"], ["none", "that of the spread"]], zone, zone === "sides" ? "whole" : ""),
    zone === "even" ? text("plusMinus", "Plus and minus", { kind }) : null,
    zone === "relative" ? text("relative", "Part, such as 0.05") : null,
    ...(zone === "sides" ? [text("plus", "Plus", { kind }), text("minus", "Minus", { kind })] : []),
    pick("shape", "Spread", [
      ["", "normal, half the zone three sigma"], ["normal", "normal"], ["truncated_normal", "normal, cut at the zone"], ["uniform", "even over the zone"],
      ["triangular", "triangle over the zone"], ["lognormal", "lognormal"], ["quantiles", "by its quantiles"],
    ], shape, "whole"),
    ...(WITH_DEVIATION.includes(shape) ? [text("deviation", "Standard deviation (optional)", { kind }), text("sigmas", "Half the zone, in sigma (optional)")] : []),
    shape === "quantiles" ? longText({
      id: idOf(id, "quantiles"), label: "Quantiles", spoken, value: texts.quantiles ?? "", rows: 4, onInput: writer(texts, "quantiles", changed),
      hint: "A line for each: a value, and what part of all lies below it, from 0 to 1.",
    }) : null,
  ].filter(Boolean);
};

export function ownFields(draft, changed, again) {
  const own = draft.question.own.tolerances;
  const text = (key, label, hint, extraClass = "") => field({ id: `tolerances-${key}`, label, value: own[key], hint, extraClass, onInput: writer(own, key, changed) });
  return [
    choice({
      id: "tolerances-method", label: "Samples", value: own.method,
      options: [["sobol", "Sobol sequences"], ["latin_hypercube", "Latin hypercubes"], ["random", "even chance"], ["", "none: stack-up only"]],
      onChange: (value) => {
        own.method = value;
        again("tolerances-method");
      },
    }),
    own.method ? text("count", own.method === "random" ? "How many" : "How many in each replicate", own.method === "sobol" ? "A power of two." : undefined) : null,
    own.method && own.method !== "random" ? text("replicates", "Replicates (optional)", "Usual: 8.") : null,
    own.method ? text("seed", "Seed (optional)") : null,
    text("indices", "Shares of the spread (optional)", "Base cases, such as 64: a power of two. Tells how much of the spread each number is behind, also together with others.", "whole"),
    longText({
      id: "tolerances-correlations", label: "Numbers that go together (optional)", value: own.correlations, rows: 2,
      hint: "A line for each pair: the names and their correlation, such as width; depth; 0.8.", onInput: writer(own, "correlations", changed),
    }),
  ].filter(Boolean);
}
