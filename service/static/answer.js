/** Extremes, flows, balance and certificate of an answer, in tables and words. */

import { make } from "./elements.js";
import { bounded, brief, counted, partsIn, shown } from "./numbers.js";
import { CONDITIONS, PLACES } from "./words.js";

const AXES = ["x", "y", "z"];
const plusMinus = (bound, unit) => (bound > 0 ? `\u00b1 ${bounded(bound)} ${unit}` : "exact");

/** Highest and lowest place of the body. */
export function extremesView(answer, words) {
  const { units, extremes } = answer;
  const one = (which, sign) => {
    const { at, value, error_bound: bound, where } = extremes[which];
    const place = at.map((length, index) => `${AXES[index]} = ${length === null ? "without end" : `${brief(length)} ${units.length}`}`);
    return make(
      "div", { class: "extreme" },
      make("dt", {}, make("span", { "aria-hidden": "true" }, `${sign} `), words[which]),
      make("dd", {},
        make("span", { class: "big" }, `${shown(value, bound)} ${units.potential}`),
        make("span", { class: "bound" }, plusMinus(bound, units.potential_difference)),
        make("span", { class: "where" }, `${where}, at ${place.join(", ")}`)),
    );
  };
  return make("dl", { class: "extremes" }, one("highest", "\u25b3"), one("lowest", "\u25bd"));
}

/** What is known on a face, in a few words, from the request. */
function knownOf(face, units) {
  const { condition } = face;
  const withUnit = (value, unit) => (typeof value === "number" ? `${brief(value)} ${unit}` : value);
  const datum = (value, unit) => {
    if (typeof value !== "object") return withUnit(value, unit);
    if (value.map === "samples") return "readings";
    const count = value.patches.length;
    return `${withUnit(value.background, unit)} with ${count} ${count === 1 ? "patch" : "patches"}`;
  };
  if (condition === "held") return `held, ${datum(face.value, units.potential)}`;
  if (condition === "flux") return `inflow, ${datum(face.inflow, units.flux)}`;
  if (condition === "film") {
    return `film, ${withUnit(face.coefficient, units.film_coefficient)} to ${datum(face.ambient, units.potential)}`;
  }
  return CONDITIONS.insulated;
}

/** Why a total has no finite value, in a sentence. */
function reason(cause, units) {
  const { kind, line, coefficient, largest_jump: jump } = cause;
  if (kind === "endless") {
    const way = coefficient >= 0 ? "flows in" : "flows out";
    return `${line} goes on without end: far along the bar ${brief(Math.abs(Number(coefficient.toPrecision(4))))} ${units.flow} ${way} on every ${units.length} of it.`;
  }
  const tenth = Number(Math.abs(coefficient * Math.LN10).toPrecision(4));
  return `Along the ${line} the given values jump by up to ${brief(jump)} ${units.potential_difference}. Next to such a line the flow `
    + `per area grows without limit: a gap there ten times narrower adds ${brief(tenth)} ${units.flow}.`;
}

/** Flow of each face and of the plane shown, with what has no finite value and why. */
export function flowsView(answer, problem, edgeGap, words) {
  const { units, faces, planes } = answer;
  const hasGap = edgeGap !== undefined && Object.values(faces).some((face) => face.with_gap);
  const gap = typeof edgeGap === "number" ? `${edgeGap} ${units.length}` : edgeGap;
  const rows = Object.entries(faces).map(([name, total]) => make(
    "tr", {},
    make("th", { scope: "row" }, name, make("span", { class: "face-place" }, ` ${PLACES[name]}`)),
    make("td", { class: "words" }, knownOf(problem.faces[name], units)),
    totalCells(total.inflow, total.error_bound),
    hasGap ? make("td", {}, total.with_gap ? `${shown(total.with_gap.inflow, total.with_gap.error_bound)} (\u00b1 ${bounded(total.with_gap.error_bound)})` : "\u2013") : null,
  ));
  const [plane] = planes;
  const through = make(
    "tr", { class: "plane-row" },
    make("th", { scope: "row" }, "plane shown"),
    make("td", { class: "words" }, `towards higher ${plane.axis}, at ${plane.axis} = ${brief(plane.position)} ${units.length}`),
    totalCells(plane.flow, plane.error_bound),
    hasGap ? make("td", {}, "\u2013") : null,
  );
  const table = make(
    "table", { class: "numbers flows" },
    make("caption", {}, `${words.flow} into the body in ${units.flow}; what leaves is negative`),
    make("thead", {}, make("tr", {},
      ["Face", "Known there", `Inflow, ${units.flow}`, `Off by at most, ${units.flow}`].map((head, index) => make("th", { scope: "col", class: index === 1 ? "words" : null }, head)),
      hasGap ? make("th", { scope: "col" }, `Without a strip of ${gap}`) : null)),
    make("tbody", {}, rows),
    make("tfoot", {}, through),
  );
  return [scrolled(table, "Flow of each face"), ...unboundedView(answer, hasGap), balanceView(answer)];
}

function totalCells(value, bound) {
  if (value === null) return [make("td", { colspan: 2, class: "no-value" }, "no finite value")];
  return [make("td", {}, shown(value, bound)), make("td", {}, bounded(bound))];
}

function unboundedView({ faces, planes, units }, hasGap) {
  const totals = [...Object.entries(faces), ["plane shown", planes[0]]].filter(([, total]) => total.unbounded);
  if (!totals.length) return [];
  const jumps = totals.some(([, total]) => total.unbounded.some((cause) => cause.kind !== "endless"));
  return [
    make("h3", {}, "Why some flows have no finite value"),
    make("ul", { class: "reasons" }, totals.map(([name, total]) => make("li", {},
      make("strong", {}, `${name}: `), total.unbounded.map((cause) => reason(cause, units)).join(" ")))),
    jumps && !hasGap
      ? make("p", {}, "Name an ", make("a", { href: "#edge-gap" }, "edge gap"), " to see the finite flow through the rest.")
      : null,
  ].filter(Boolean);
}

function balanceView({ balance, units }) {
  const { closed, generation, residual, error_bound: bound, unbounded_faces: open } = balance;
  const inside = generation ? ` ${shown(generation)} ${units.flow} are generated inside.` : "";
  if (closed === null) {
    return verdict("open", "No balance", `Faces without end have no finite inflow (${open.join(", ")}), so there is nothing to add up.${inside}`);
  }
  const sum = `Inflows and generation add up to ${shown(Number(residual.toPrecision(2)))} ${units.flow}; the bounds allow ${bounded(bound)} ${units.flow}.`;
  const rest = open.length ? " The parts that grow without limit cancel between the faces." : "";
  return closed
    ? verdict("good", "Balance closed", `${sum}${rest}${inside}`)
    : verdict("bad", "Balance not closed", `${sum} Do not rely on these flows.${inside}`);
}

/** A sentence under a sign and a word, so that colour is not alone. @param {"good"|"bad"|"open"} kind */
function verdict(kind, title, sentence) {
  const sign = { good: "\u2713", bad: "\u2717", open: "\u25cb" }[kind];
  return make("p", { class: `verdict ${kind}` },
    make("span", { class: "sign", "aria-hidden": "true" }, sign),
    make("span", {}, make("strong", {}, `${title}. `), sentence));
}

/** A wide table may be moved sideways by itself. */
export function scrolled(table, label) {
  return make("div", { class: "scrolled", tabindex: 0, role: "region", "aria-label": label }, table);
}

/** The evidence for the numbers, to be judged by a person. */
export function certificateView(answer, plane) {
  const { certificate: c, units } = answer;
  const unit = units.potential_difference;
  const span = plane.highest - plane.lowest;
  const share = span > 0 && c.error_bound > 0 && span > c.error_bound ? ` That is ${partsIn(span / c.error_bound)} of the range shown.` : "";
  const isMet = c.error_bound <= c.accuracy_asked;
  const asked = `Asked for: ${bounded(c.accuracy_asked)} ${unit}.`;
  const within = `No value is further than ${bounded(c.error_bound)} ${unit} from the exact solution of the problem as described.${share} ${asked}`;
  const places = c.checked_places === 1 ? "one place" : `${c.checked_places} places`;
  const compared = `computed in two independent ways at ${places}, the values differ by at most`;
  const agree = c.agreement !== null && c.agreement <= c.agreement_bound;
  return [
    verdict(isMet ? "good" : "bad", isMet ? "Within the accuracy asked for" : "Accuracy not met", within),
    c.agreement === null
      ? verdict("open", "One way only", "Only one of the two representations can be evaluated here, so they were not compared. The bound above holds by itself.")
      : verdict(agree ? "good" : "bad", agree ? "Both representations agree" : "The representations disagree",
          `As a check, ${compared} ${bounded(c.agreement)} ${unit}; their bounds allow ${bounded(c.agreement_bound)} ${unit}.${agree ? "" : " Do not rely on these numbers."}`),
    make("dl", { class: "facts" },
      fact("Method", c.method),
      fact("Work", `${counted(c.terms.time_nodes)} nodes of the time integral, ${counted(c.terms.products)} products of profiles, `
        + `${counted(c.terms.series_terms)} series terms at the checked places`),
      fact("Not covered", "The bound is about the mathematics. It says nothing of conductivities, films or readings that are off, of properties that change with the field, or of a body that is no plain block.")),
  ];
}

export const fact = (term, words) => make("div", {}, make("dt", {}, term), make("dd", {}, words));

/** Warnings of both answers, each once. */
export function warningsView(answers) {
  const messages = new Set(answers.flatMap((answer) => answer.warnings)
    // These stand with their reasons under the table of flows.
    .filter((warning) => warning.code !== "unbounded-total")
    .map((warning) => warning.message));
  if (!messages.size) return make("p", { class: "hint" }, "No warnings.");
  return make("ul", { class: "warnings" }, [...messages].map((message) => make("li", {}, message)));
}

/** The body in a sentence, from the request. */
export function bodySentence(problem, units) {
  const withUnit = (value, unit) => (typeof value === "number" ? `${brief(value)} ${unit}` : value);
  const { size, conductivity } = problem.body;
  const sides = `${withUnit(size.x, units.length)} \u00d7 ${withUnit(size.y, units.length)}`;
  const body = size.z === "semi-infinite" ? `Bar ${sides}, without end along z` : `Block ${sides} \u00d7 ${withUnit(size.z, units.length)}`;
  const k = typeof conductivity === "object"
    ? `conductivity ${AXES.map((axis) => `${withUnit(conductivity[axis], units.conductivity)} along ${axis}`).join(", ")}`
    : `conductivity ${withUnit(conductivity, units.conductivity)}`;
  const sources = problem.sources?.length ?? 0;
  return `${body}; ${k}${sources ? `; ${sources} ${sources === 1 ? "source" : "sources"} inside` : ""}.`;
}
