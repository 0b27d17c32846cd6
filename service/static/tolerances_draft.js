/** What tolerances do to results, as it is typed and as a request wants it. */

import { referencesOf } from "./number_draft.js";
import { idOf, quantity, text } from "./typed.js";

/** Kinds of spread that know how many standard deviations half a zone is. */
export const WITH_DEVIATION = ["normal", "truncated_normal", "lognormal"];
/** Quantiles that draw the picture of a distribution: from the tails inwards. */
const QUANTILES = [0.005, 0.01, 0.025, 0.05, 0.1, 0.15, 0.2, 0.25, 0.3, 0.35, 0.4, 0.45, 0.5, 0.55, 0.6, 0.65, 0.7, 0.75, 0.8, 0.85, 0.9, 0.95, 0.975, 0.99, 0.995];

export function textsOf(reference) {
  const { plus_minus: plusMinus, plus, minus, relative, distribution = {} } = reference;
  const zone = relative !== undefined ? "relative" : plus !== undefined || minus !== undefined ? "sides" : plusMinus === undefined ? "none" : "even";
  return {
    zone, plusMinus: text(plusMinus), plus: text(plus), minus: text(minus), relative: text(relative), shape: distribution.shape ?? "",
    sigmas: text(distribution.sigmas), deviation: text(distribution.standard_deviation),
    quantiles: (distribution.values ?? []).map((value, index) => `${value}, ${distribution.probabilities[index]}`).join("\n"),
  };
}

/** @param {any} asked a request, or nothing */
export function ownOf({ numbers, samples, correlations = [], variance_indices: indices }) {
  return {
    // Samples are what shows whether limits hold often enough, so that a new question asks for some.
    method: samples?.method ?? (numbers ? "" : "sobol"), count: text(samples?.count) || "128", replicates: text(samples?.replicates), seed: text(samples?.seed),
    indices: text(indices?.count), indicesSeed: text(indices?.seed),
    correlations: correlations.map(({ numbers: pair, coefficient }) => `${pair.join("; ")}; ${coefficient}`).join("\n"),
  };
}

/** How far a number may be off, as a request wants it. */
export function zoneOf({ zone = "even", plusMinus = "", plus = "", minus = "", relative = "" }) {
  if (zone === "relative") return { relative: quantity(relative) };
  if (zone === "sides") return { plus: quantity(plus), minus: quantity(minus) };
  return zone === "even" ? { plus_minus: quantity(plusMinus) } : {};
}

function distributionOf({ shape = "", sigmas = "", deviation = "", quantiles = "" }) {
  if (!shape) return {};
  if (shape === "quantiles") {
    const rows = quantiles.split("\n").filter((line) => line.trim()).map((line) => line.split(/[,;\t]/));
    return { distribution: { shape, values: rows.map(([value]) => quantity(value) ?? ""), probabilities: rows.map(([, part = ""]) => quantity(part) ?? "") } };
  }
  if (!WITH_DEVIATION.includes(shape)) return { distribution: { shape } };
  return { distribution: { shape, ...(deviation.trim() ? { standard_deviation: quantity(deviation) } : {}), ...(sigmas.trim() ? { sigmas: quantity(sigmas) } : {}) } };
}

const seeded = (typed) => (typed.trim() ? { seed: quantity(typed) } : {});

/** Part of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const { numbers, own } = draft.question;
  const { method, count, replicates, seed, indices, indicesSeed, correlations } = own.tolerances;
  for (const key of ["method", "count", "replicates", "seed"]) note(`#/samples/${key}`, `tolerances-${key}`);
  note("#/samples", "tolerances-method");
  note("#/variance_indices", "tolerances-indices");
  note("#/correlations", "tolerances-correlations");
  const references = referencesOf(draft, numbers, numbers.map((_, index) => `#/numbers/${index}`), note, ({ texts }, pointer, id) => {
    const fields = { plus_minus: "plusMinus", plus: "plus", minus: "minus", relative: "relative", distribution: "shape" };
    for (const [key, part] of Object.entries(fields)) note(`${pointer}/${key}`, idOf(id, part));
    note(`${pointer}/distribution/standard_deviation`, idOf(id, "deviation"));
    note(`${pointer}/distribution/sigmas`, idOf(id, "sigmas"));
    for (const key of ["values", "probabilities"]) note(`${pointer}/distribution/${key}`, idOf(id, "quantiles"));
    return { ...zoneOf(texts), ...distributionOf(texts) };
  });
  const pairs = correlations.split("\n").filter((line) => line.trim()).map((line) => line.split(";").map((part) => part.trim()));
  const isReplicated = method && method !== "random";
  return {
    numbers: references, limits,
    ...(pairs.length ? { correlations: pairs.map((parts) => ({ numbers: parts.slice(0, -1), coefficient: quantity(parts.at(-1)) ?? "" })) } : {}),
    ...(method ? {
      samples: { method, count: quantity(count), ...(isReplicated && replicates.trim() ? { replicates: quantity(replicates) } : {}), ...seeded(seed) }, quantiles: QUANTILES,
    } : {}),
    ...(indices.trim() ? { variance_indices: { count: quantity(indices), ...seeded(indicesSeed) } } : {}),
  };
}
