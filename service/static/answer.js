/** Extremes, certificate and warnings of an answer in words a person can judge. */

import { make, verdict } from "./elements.js";
import { bounded, counted, greatest, partsIn, placed, pretty, shown, written } from "./numbers.js";
import { PHYSICS } from "./words.js";

const AXES = ["x", "y", "z"];

/** Highest and lowest place of the body, and what the picture's numbers are worth. */
export function extremesView(answer, words) {
  const { units, extremes, certificate } = answer;
  const difference = pretty(units.potential_difference);
  const scale = greatest(answer.grids.flatMap(({ axes }) => Object.values(axes).flat()));
  const one = (which, sign) => {
    const { at, value, error_bound: bound, where } = extremes[which];
    // An end infinitely far is null; `where` says so in words.
    const place = at.flatMap((length, index) => (length === null ? [] : [`${AXES[index]} = ${placed(length, scale)}`]));
    return make(
      "div", { class: "extreme" },
      make("dt", {}, make("span", { "aria-hidden": "true" }, `${sign} `), `${words[which]} of the body`),
      make("dd", {},
        make("span", { class: "big" }, `${shown(value, bound)} ${pretty(units.potential)}`),
        make("span", { class: "bound" }, bound > 0 ? `\u00b1 ${bounded(bound)} ${difference}` : "exact"),
        make("span", { class: "where" }, `${where}; ${place.join(", ")} ${pretty(units.length)}`)),
    );
  };
  return make(
    "dl", { class: "extremes" }, one("highest", "\u25b3"), one("lowest", "\u25bd"),
    make("div", { class: "extreme" },
      make("dt", {}, "Every value of the plane is within"),
      make("dd", {},
        make("span", { class: "big" }, `${bounded(certificate.error_bound)} ${difference}`),
        make("span", { class: "where" }, "of the exact solution; see the ", make("a", { href: "#certificate-heading" }, "certificate")))),
  );
}

/** The evidence for the numbers. */
export function certificateView(answer, plane) {
  const { certificate: c, units } = answer;
  const unit = pretty(units.potential_difference);
  const span = plane.highest - plane.lowest;
  const share = c.error_bound > 0 && span > c.error_bound ? ` That is ${partsIn(span / c.error_bound)} of the range shown.` : "";
  const isMet = c.error_bound <= c.accuracy_asked;
  const within = `No value is further than ${bounded(c.error_bound)} ${unit} from the exact solution of the problem as described.`
    + `${share} Asked for: ${bounded(c.accuracy_asked)} ${unit}.`;
  return [
    verdict(isMet ? "good" : "bad", isMet ? "Within the accuracy asked for" : "Accuracy not met", within),
    agreementView(c, unit),
    make("dl", { class: "facts" },
      fact("Method", c.method),
      fact("Work", `${counted(c.terms.time_nodes)} nodes of the time integral, ${counted(c.terms.products)} products of profiles, `
        + `${counted(c.terms.series_terms)} series terms at the checked places`),
      c.iteration ? fact("Iteration", `Film faces were iterated in ${counted(c.iteration.steps)} steps; the bound holds what is left over of their conditions.`) : null,
      fact("Not covered", "The bound is about the mathematics. It says nothing of conductivities, films or readings that are "
        + "off, of properties that change otherwise than described, or of a body that is no plain block.")),
  ];
}

function agreementView(c, unit) {
  if (c.agreement === null) {
    return verdict("open", "One way only", "Only one of the two representations can be evaluated here, so they were not compared. "
      + "The bound above holds by itself.");
  }
  const agree = c.agreement <= c.agreement_bound;
  const places = c.checked_places === 1 ? "one place" : `${c.checked_places} places`;
  return verdict(
    agree ? "good" : "bad",
    agree ? "Both representations agree" : "The representations disagree",
    `As a check the field was computed in two independent ways at ${places}; they differ by at most ${bounded(c.agreement)} ${unit}, `
      + `and their bounds allow ${bounded(c.agreement_bound)} ${unit}.${agree ? "" : " Do not rely on these numbers."}`,
  );
}

const fact = (term, words) => make("div", {}, make("dt", {}, term), make("dd", {}, words));

/** Warnings of both answers, each once. */
export function warningsView(answers) {
  const messages = new Set(answers.flatMap((answer) => answer.warnings)
    // These stand with their reasons under the table of flows.
    .filter((warning) => warning.code !== "unbounded-total")
    .map((warning) => warning.message));
  if (!messages.size) return make("p", { class: "hint" }, "No warnings.");
  return make("ul", { class: "warnings" }, [...messages].map((message) => make("li", {}, message.replace(/`/g, ""))));
}

/** The body in a sentence, from the request. */
export function bodySentence(problem, units) {
  const { size, conductivity, conductivity_law: law, layers } = problem.body;
  const sources = problem.sources?.length ?? 0;
  const inside = sources ? `; ${sources} ${sources === 1 ? "source" : "sources"} inside` : "";
  const open = AXES.filter((axis) => typeof size[axis] === "string" && size[axis].endsWith("infinite"));
  const sides = AXES.filter((axis) => size[axis] !== undefined && !open.includes(axis))
    .map((axis) => (open.length ? `${written(size[axis], units.length)} along ${axis}` : written(size[axis], units.length)));
  const without = [["infinite", "without ends along"], ["semi-infinite", "without a far end along"]];
  const ends = without.map(([kind, words]) => [words, open.filter((axis) => size[axis] === kind)])
    .filter(([, axes]) => axes.length).map(([words, axes]) => `${words} ${axes.join(" and ")}`);
  if (layers) {
    const names = layers.map(({ name, thickness }, index) => `${name ?? `layer ${index}`} ${written(thickness, units.length)}`);
    return `Stack on ${[sides.join(open.length ? ", " : " \u00d7 "), ...ends].filter(Boolean).join(", ")}; from below ${names.join(", ")}${inside}.`;
  }
  const isBar = open.length === 1 && size.z === "semi-infinite";
  const isHalfSpace = size.x === "infinite" && size.y === "infinite" && size.z === "semi-infinite";
  const kind = isBar ? "Bar" : isHalfSpace ? "Half-space" : open.length ? "Body" : "Block";
  const body = kind === "Bar"
    ? `Bar ${AXES.slice(0, 2).map((axis) => written(size[axis], units.length)).join(" \u00d7 ")}, without end along z`
    : `${kind} ${[sides.join(open.length ? ", " : " \u00d7 "), ...ends].filter(Boolean).join(", ")}`;
  const k = conductivity === undefined ? "" : typeof conductivity === "object"
    ? AXES.map((axis) => `${written(conductivity[axis], units.conductivity)} along ${axis}`).join(", ")
    : written(conductivity, units.conductivity);
  const varies = law ? `${conductivity === undefined ? "" : ", "}varying with the ${PHYSICS[problem.potential].potential.toLowerCase()}` : "";
  return `${body}; conductivity ${k}${varies}${inside}.`;
}
