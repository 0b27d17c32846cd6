/** What tolerances do: ranges held against limits, the sampled distribution, what each number adds, and the stack-up. */

import { axis, behind, chart, COLOURS, inLines, limitLine } from "./charts.js";
import { make, verdict } from "./elements.js";
import { brief, counted, pretty, shown } from "./numbers.js";
import { switched } from "./switched.js";
import { differenceOf, headed, limitWords, rowHead, table, valueCell, withUnit } from "./tables.js";

const percent = (part) => `${Number((100 * part).toPrecision(part > 0.99 ? 5 : 3))} %`;

/** @param {any} answer of POST /v1/tolerances */
export function tolerancesView(answer) {
  const { stack_ups: stacks, limits, propagation, numbers, failures } = answer;
  const views = stacks.map((stack, index) => [stack.result, () => resultView(answer, stack, index)]);
  return [
    limits.length ? heldVerdict(answer) : null,
    ...failures.map(({ count, message }) => verdict("open", `${counted(count)} ${count === 1 ? "case" : "cases"} within the zones without a result`, message)),
    limits.length ? limitsTable(answer) : null,
    propagation?.all_limits && limits.length > 1 ? chanceVerdict("All limits together", propagation.all_limits) : null,
    ...numbers.filter(({ reason }) => reason).map(({ name, reason }) => verdict("open", `${name} could not be varied`, reason.message)),
    ...(propagation?.failures ?? []).map(({ count, message }) => verdict("open", `${counted(count)} cases without a result`, message)),
    switched("Result", views, "tolerances-result"),
    propagation ? make("p", { class: "hint" }, `${counted(propagation.case_count)} sampled cases. Intervals at ${percent(propagation.confidence)}: ${propagation.intervals}`) : null,
    numbersTable(numbers),
  ].filter(Boolean);
}

function heldVerdict({ limits, all_held: held }) {
  const missed = limits.filter((limit) => limit.held === "no").length;
  if (held === "yes") return verdict("good", "All limits hold in the worst case", "Every case that was computed within the tolerances surely holds them.");
  if (held === "no") return verdict("bad", missed === 1 ? "One limit does not hold in the worst case" : `${missed} limits do not hold in the worst case`, `That is certain: a case within the tolerances was computed that does not hold ${missed === 1 ? "it" : "one of them"}.`);
  return verdict("open", "Undecided", "In the worst case a margin is smaller than its error, or a case within the tolerances has no result.");
}

function limitsTable({ limits, stack_ups: stacks, units }) {
  return table("Limits under the tolerances: by how much each holds at worst, and how often", ["Limit", "Worst case, computed", "Root sum of squares", "Holds in"], limits.map((limit) => {
    const { unit } = stacks.find(({ result }) => result === limit.result);
    const step = differenceOf(unit, units);
    const words = (value, bound) => withUnit(shown(value, Math.max(bound ?? 0, Math.abs(value) * 1e-5)), step);
    const margin = (held, value, bound, under) => make("td", { class: held === "no" ? "missed" : null },
      value === null ? "\u2013" : `${SIGNS[held]}\u00a0${words(value, bound)}`, under ? make("span", { class: "known" }, under) : null);
    const added = limit.first_order_margin === null ? null : `to first order ${words(limit.first_order_margin, 0)}`;
    const chance = limit.probability;
    return [
      rowHead(limit.name ?? limit.result, limit.name ? `${limit.result} ${limitWords(limit, unit)}` : limitWords(limit, unit)),
      margin(limit.held, limit.margin, limit.error_bound, added), margin(limit.root_sum_square_held, limit.root_sum_square_margin, 0),
      chance ? make("td", {}, chance.value === null ? "\u2013" : percent(chance.value), make("span", { class: "known" }, interval(chance))) : make("td", {}, "not sampled"),
    ];
  }), "limits wraps");
}

const SIGNS = { yes: "\u2713", no: "\u2717", undecided: "?" };

const interval = ({ low, high }) => (low === null ? "" : `${percent(low)} to ${percent(high)}`);

function chanceVerdict(words, chance) {
  const kind = chance.low !== null && chance.low > 0.99 ? "good" : chance.value < 0.5 ? "bad" : "open";
  return verdict(kind, words, `They hold in ${percent(chance.value)} of cases, ${interval(chance)}${chance.undecided_cases ? `; ${chance.undecided_cases} cases are undecided` : ""}.`);
}

function resultView(answer, stack, index) {
  const spread = answer.propagation?.results[index];
  const limits = answer.limits.filter(({ result }) => result === stack.result);
  const indices = answer.variance_indices?.results[index];
  return [
    ranges(stack, spread, limits),
    spread ? distribution(spread, limits, answer.propagation.case_count) : null,
    additions(stack, answer.units),
    indices ? indexBars(indices) : null,
    worstTable(stack, answer.numbers),
    behind("Stack-up in numbers", stackTable(stack, answer.units), ...(spread ? [spreadTable(spread)] : [])),
  ].filter(Boolean);
}

const linesOf = (limits) => limits.flatMap(({ name, at_most: most, at_least: least }) => [
  ...(most === undefined ? [] : [limitLine(most, name ?? "at most", "x")]), ...(least === undefined ? [] : [limitLine(least, name ?? "at least", "x")]),
]);

/** How far the result may lie, by each way of adding up, against its limits. */
function ranges(stack, spread, limits) {
  const quantile = (part) => spread?.quantiles.find(({ probability }) => probability === part)?.value ?? null;
  const rows = [
    ["worst case,<br>computed", stack.lowest.value, stack.highest.value, COLOURS.main],
    ["to first order", stack.first_order_low, stack.first_order_high, COLOURS.second],
    ["root sum<br>of squares", stack.middle - stack.root_sum_square, stack.middle + stack.root_sum_square, COLOURS.second],
    ...(spread ? [["95 % of samples", quantile(0.025), quantile(0.975), COLOURS.held]] : []),
  ].filter(([, low, high]) => low !== null && high !== null && Number.isFinite(low)).reverse();
  const lines = linesOf(limits);
  return chart({
    label: `Ranges of ${stack.result} by each way of adding up tolerances, with its limits. The numbers are in the table that follows.`,
    caption: "How far the result may lie. The ring is the result as it stands; dashed lines are limits.",
    height: 100 + 38 * rows.length,
    data: [
      ...rows.map(([name, low, high, colour]) => ({
        type: "scatter", mode: "lines+markers", x: [low, high], y: [name, name], line: { color: colour, width: 7 }, marker: { color: colour, symbol: "line-ns", size: 14, line: { color: colour, width: 2.5 } },
        hovertemplate: `%{x:.6~g} ${pretty(stack.unit)}<extra></extra>`,
      })),
      { type: "scatter", mode: "markers", x: rows.map(() => stack.nominal), y: rows.map(([name]) => name), marker: { size: 10, color: "#fffefa", line: { color: COLOURS.limit, width: 1.6 } }, hovertemplate: "as it stands<extra></extra>" },
    ],
    layout: {
      margin: { l: 20, r: 20, t: limits.length ? 26 : 12, b: 20 }, xaxis: axis(headed(stack.result, stack.unit)), yaxis: axis("", { ticks: "", showline: false, range: [-0.6, rows.length - 0.4] }),
      shapes: lines.map(({ shape }) => shape), annotations: lines.map(({ note }) => ({ ...note, yanchor: "bottom", xanchor: "center", xshift: 0 })),
    },
  });
}

/** A piece of the picture stands for so many cases at least, or its height would be chance. */
const FEWEST_IN_A_PIECE = 5;

/** Quantiles far enough apart for so many cases, with the lowest and the highest case at the ends. */
function stepsOf({ lowest, highest, quantiles }, count) {
  const least = (FEWEST_IN_A_PIECE - 0.5) / count;
  const steps = [{ value: lowest, probability: 0 }];
  for (const quantile of quantiles) {
    const { value, probability } = quantile;
    if (value !== null && probability - steps.at(-1).probability >= least && 1 - probability >= least) steps.push(quantile);
  }
  return [...steps, { value: highest, probability: 1 }];
}

/** Parts of a distribution between quantiles, cut where a limit runs through one. */
function piecesOf(spread, limits, count) {
  const known = stepsOf(spread, count);
  const cuts = limits.flatMap(({ at_most: most, at_least: least }) => [most, least]).filter((cut) => cut !== undefined);
  const isMissed = (at) => limits.some(({ at_most: most = Infinity, at_least: least = -Infinity }) => at > most || at < least);
  return known.slice(1).flatMap(({ value: to, probability }, index) => {
    const { value: from, probability: before } = known[index];
    if (!(to > from)) return [];
    const ends = [from, ...cuts.filter((cut) => cut > from && cut < to).sort((a, b) => a - b), to];
    const density = (probability - before) / (to - from);
    return ends.slice(1).map((end, piece) => ({ from: ends[piece], to: end, density, part: density * (end - ends[piece]), isMissed: isMissed((end + ends[piece]) / 2) }));
  });
}

function distribution(spread, limits, count) {
  const pieces = piecesOf(spread, limits, count);
  if (!pieces.length) return null;
  const lines = linesOf(limits);
  return chart({
    label: `Distribution of ${spread.result} over the samples, with its limits. Its quantiles are in the table that follows.`,
    caption: `Sampled distribution: the area is how often a value comes up${limits.length ? "; hatched beyond a limit" : ""}.`,
    height: 300,
    data: [{
      type: "bar", x: pieces.map(({ from, to }) => (from + to) / 2), width: pieces.map(({ from, to }) => to - from), y: pieces.map(({ density }) => density),
      marker: {
        color: pieces.map(({ isMissed }) => (isMissed ? "#f0c4bc" : "#bcd3c3")), line: { color: "#fffefa", width: 0.5 },
        pattern: { shape: pieces.map(({ isMissed }) => (isMissed ? "/" : "")), fgcolor: COLOURS.missed, size: 7, solidity: 0.25 },
      },
      customdata: pieces.map(({ from, to, part }) => `${brief(from)} to ${brief(to)} ${pretty(spread.unit)}: ${percent(part)}`), hovertemplate: "%{customdata}<extra></extra>",
    }],
    layout: {
      margin: { l: 20, r: 20, t: limits.length ? 26 : 12, b: 20 }, bargap: 0, xaxis: axis(headed(spread.result, spread.unit)),
      yaxis: axis("how often", { showticklabels: false, ticks: "", rangemode: "tozero" }),
      shapes: lines.map(({ shape }) => shape), annotations: lines.map(({ note }) => ({ ...note, yanchor: "bottom", xanchor: "center", xshift: 0 })),
    },
  });
}

/** The cases in which a result is lowest and highest, number by number. */
const worstTable = ({ result, unit, lowest, highest }, numbers) => table(`The worst of ${result} that was computed, and the numbers there`, ["", "Lowest", "Highest"], [
  [rowHead(headed(result, unit)), valueCell(lowest.value, lowest.error_bound), valueCell(highest.value, highest.error_bound)],
  ...numbers.map(({ name, unit: own }) => [rowHead(headed(name, own)), ...[lowest, highest].map(({ numbers: there }) => make("td", {}, valueOf(there, name)))]),
], "wraps");

function valueOf(there, name) {
  const found = there.find((one) => one.name === name);
  return found ? brief(found.value) : "\u2013";
}

/** How far the ends of each number's own zone lower and raise the result, as computed; the strongest on top. */
function additions({ result, contributions, unit, nominal }, units) {
  const step = differenceOf(unit, units);
  const known = contributions.map(({ number, at_low_end: low, at_high_end: high }) => ({ number, changes: [low, high].filter((value) => value !== null).map((value) => value - nominal) }))
    .filter(({ changes }) => changes.length).slice(0, 20).reverse();
  if (!known.length) return null;
  const side = (name, most, colour) => ({
    type: "bar", orientation: "h", y: known.map(({ number }) => inLines(number)), x: known.map(({ changes }) => most(0, ...changes)), name, marker: { color: colour, line: { color: COLOURS.main, width: 1 } },
    hovertemplate: `%{x:.5~g} ${pretty(step)}<extra></extra>`,
  });
  return chart({
    label: `Bars: by how much the tolerance of each number alone lowers and raises ${result}. The numbers are in the table that follows.`,
    caption: "By how much the ends of each tolerance alone lower (pale) and raise (filled) the result, as computed; the strongest on top.",
    height: 90 + 46 * known.length, data: [side("low", Math.min, COLOURS.tint), side("high", Math.max, COLOURS.main)],
    layout: { barmode: "overlay", bargap: 0.4, xaxis: axis(headed("change", step), { zeroline: true, zerolinecolor: COLOURS.limit }), yaxis: axis("", { ticks: "", showline: false }) },
  });
}

function indexBars({ result, numbers }) {
  if (numbers.every(({ total }) => total.value === null)) return make("p", { class: "hint" }, `${result} does not vary beyond its error bounds, so there are no shares of its spread.`);
  const ranked = [...numbers].sort((a, b) => (a.total.value ?? 0) - (b.total.value ?? 0));
  const side = (key, name, colour) => ({
    type: "bar", orientation: "h", name, y: ranked.map(({ number }) => inLines(number)), x: ranked.map((one) => one[key].value), marker: { color: colour, line: { color: COLOURS.second, width: 1 } },
    error_x: {
      type: "data", symmetric: false, color: COLOURS.limit, thickness: 1.2,
      array: ranked.map((one) => Math.max(0, (one[key].high ?? one[key].value) - one[key].value)), arrayminus: ranked.map((one) => Math.max(0, one[key].value - (one[key].low ?? one[key].value))),
    },
    hovertemplate: "%{x:.3~f}<extra></extra>",
  });
  return chart({
    label: `Bars: shares of the spread of ${result}, of each number alone and together with others.`,
    caption: "Share of the spread: that would go if the number alone were known, and that it has a hand in. Thin lines are intervals.",
    height: 120 + 46 * ranked.length, data: [side("total", "has a hand in", "#c9dde4"), side("first", "alone", COLOURS.second)],
    layout: { showlegend: true, bargap: 0.3, xaxis: axis("share of the variance", { rangemode: "tozero" }), yaxis: axis("", { ticks: "", showline: false }) },
  });
}

function stackTable({ result, unit, nominal, contributions, first_order_low: low, first_order_high: high, middle, root_sum_square: rss, standard_deviation: deviation, error_estimate: error, bend, lowest, highest }, units) {
  const step = differenceOf(unit, units);
  const number = (value, bound = error) => make("td", {}, value === null ? "\u2013" : shown(value, Math.max(bound ?? 0, Math.abs(value) * 1e-6)));
  const share = (part) => make("td", {}, part === null ? "\u2013" : percent(part));
  const about = (value) => withUnit(brief(Number(value.toPrecision(5))), step);
  const remarks = [
    deviation === null ? "" : `Standard deviation to first order: ${about(deviation)}.`,
    bend === null ? "" : bend > 0 ? `Within the tolerances the result departs from first order by about ${about(bend)}.` : "Within the tolerances the result follows the numbers in proportion.",
  ].filter(Boolean);
  return make("div", {},
    table(`What each number does to ${result}, with all others as they stand, ${pretty(unit)}`, ["Number", "At its lower end", "At its upper end", "Departs from first order"], contributions.map((one) => [
      rowHead(one.number), number(one.at_low_end, 0), number(one.at_high_end, 0), number(one.bend, 0)]), "wraps"),
    table(`What adds up in ${result} to first order, ${pretty(step)}`, ["Number", "Slope", "Lowers by", "Raises by", "Share of squares", "Share of variance"], contributions.map((one) => [
      rowHead(one.number, one.smooth ? pretty(one.unit) : `${pretty(one.unit)}; at a kink`), valueCell(one.derivative, one.error_estimate), number(one.low), number(one.high), share(one.square_share), share(one.variance_share)]), "wraps"),
    table(`${result}, ${pretty(unit)}`, ["As added up", "Lowest", "Highest"], [
      [rowHead("as it stands"), number(nominal), number(nominal)],
      [rowHead("worst case, computed"), valueCell(lowest.value, lowest.error_bound), valueCell(highest.value, highest.error_bound)],
      [rowHead("added up to first order"), number(low), number(high)],
      [rowHead("root sum of squares", `about the middle, ${middle === null ? "\u2013" : brief(Number(middle.toPrecision(7)))}`), number(middle === null ? null : middle - rss), number(middle === null ? null : middle + rss)],
    ], "wraps"),
    remarks.length ? make("p", { class: "hint" }, remarks.join(" ")) : null);
}

const spreadTable = ({ result, unit, mean, standard_deviation: deviation, lowest, highest, quantiles }) => table(
  `Samples of ${result}, ${pretty(unit)}`, ["", "Estimate", "Interval from", "to"],
  [["mean", mean], ["standard deviation", deviation], ...quantiles.map((one) => [`${percent(one.probability)} lie below`, one]), ["lowest seen", { value: lowest }], ["highest seen", { value: highest }]]
    .map(([words, one]) => [rowHead(words), ...[one.value, one.low ?? null, one.high ?? null].map((value) => make("td", {}, value === null ? "\u2013" : brief(value)))]),
);

const numbersTable = (numbers) => behind("Numbers and their tolerances", table("Tolerance zone and spread of each number", ["Number", "Stands at", "Plus", "Minus", "Standard deviation"], numbers.map((one) => [
  rowHead(one.name, one.unit === "1" ? null : pretty(one.unit)), ...[one.nominal, one.plus, one.minus, one.standard_deviation].map((value) => make("td", {}, brief(value)))]), "wraps"));
