/** Which values of one number will do: the result over the number, its limits, and where all of them hold. */

import { axis, behind, chart, COLOURS, HELD_BAND, limitLine } from "./charts.js";
import { make, verdict } from "./elements.js";
import { bounded, brief, counted, pretty, shown } from "./numbers.js";
import { switched } from "./switched.js";
import { differenceOf, headed, heldWord, rowHead, table, valueCell, withUnit } from "./tables.js";

/**
 * The cases that draw the curve: the answer itself tells only where it crosses. Limits come back in the units of results.
 * @param {any} request of POST /v1/sizing, as it was answered @param {any} answer @param {number} points how many
 */
export function curveRequest(request, answer, points) {
  const { low, high, name } = answer.sizing.number;
  const { spread, at, shift, scale } = request.number;
  const part = (index) => index / (points - 1);
  const value = spread === "logarithmic" ? (index) => low * (high / low) ** part(index) : (index) => low + (high - low) * part(index);
  const values = Array.from({ length: points }, (_, index) => (index === points - 1 ? high : value(index)));
  const { problem, results, accuracy, target } = request;
  const limits = target ? [{ result: target.result, at_least: target.equals }] : request.limits;
  return { problem, results, numbers: [{ name, at, shift, scale }], cases: { table: "grid", values: [values] }, limits, accuracy };
}

/**
 * @param {any} answer of POST /v1/sizing @param {any} asked its request
 * @param {any} cases answer of `curveRequest`; undefined until it comes, null if it cannot be had
 */
export function sizingView(answer, asked, cases) {
  const { sizing, results } = answer;
  const { number } = sizing;
  const isTarget = sizing.holds === null;
  const watched = isTarget ? [asked.target.result] : [...new Set(asked.limits.map(({ result }) => result))];
  const pictures = watched.map((name) => [name, () => [picture(answer, asked, cases, results.find((result) => result.name === name))]]);
  const first = sizing.intervals.flatMap(({ low, high }) => [low, high]).find(({ result }) => result)?.result ?? sizing.nearest?.result;
  pictures.sort(([a], [b]) => Number(b === first) - Number(a === first));
  return [
    verdictOf(answer, asked),
    sizing.complete ? null : verdict("open", "Stopped early", "As many cases were computed as were allowed; edges are told as far as they are known."),
    cases ? switched("Result", pictures, "sizing-shown") : make("p", { class: "hint" }, cases === null ? "There is no picture: its cases would take too long." : "The picture follows."),
    isTarget ? edgesTable(sizing.solutions, number, "Where the result has its value") : intervalsTable(sizing),
    ...sizing.touches.map((touch) => verdict("open", "Touched", `Between ${brief(touch.low)} and ${withUnit(brief(touch.high), number.unit)} ${isTarget ? "the value" : `the limit ${calledBy(touch)}`} is met to within the errors, so it is left open whether it is passed.`)),
    ...sizing.invalid.map((part) => verdict("open", `No result from ${brief(part.low)} to ${withUnit(brief(part.high), number.unit)}`, part.message)),
    sizing.sizes ? sizesTable(sizing.sizes, number, answer) : null,
    sizing.tolerances ? tolerancesTable(sizing.tolerances) : null,
    make("p", { class: "hint" }, `${counted(sizing.case_count)} cases.`),
    cases ? behind("Values behind the picture", curveTable(cases)) : null,
  ].filter(Boolean);
}

/** What a limit is called. */
const calledBy = ({ name, result }) => name ?? result;

function verdictOf(answer, asked) {
  const { holds, number, intervals, nearest, solutions, tolerances } = answer.sizing;
  const at = (value) => withUnit(brief(value), number.unit);
  if (holds === null) {
    if (solutions.length) return verdict("good", solutions.length === 1 ? "One value will do" : `${solutions.length} values will do`, `${number.name} = ${solutions.map(({ value }) => at(value)).join(", ")}.`);
    const apart = nearest && nearest.margin !== null ? `, ${marginWords(nearest, answer)} ${nearest.margin > 0 ? "above" : "below"} it` : "";
    return verdict("bad", "Not reached", `In the range ${asked.target.result} never has this value${nearest ? `; it comes nearest at ${number.name} = ${at(nearest.value)}${apart}` : ""}.`);
  }
  const off = tolerances ? ", with all tolerances" : "";
  if (holds === "everywhere") return verdict("good", `All limits hold in the whole range${off}`, `From ${at(number.low)} to ${at(number.high)}.`);
  if (holds === "somewhere") {
    const parts = intervals.map(({ low, high }) => `from ${at(Number(low.value.toPrecision(6)))} to ${at(Number(high.value.toPrecision(6)))}`);
    return verdict("good", parts.length === 1 ? `All limits hold in one interval${off}` : `All limits hold in ${parts.length} intervals${off}`, `${number.name} ${parts.join(", and ")}.`);
  }
  if (holds === "undecided") return verdict("open", "Undecided", "Nowhere for certain, but perhaps where a limit is touched.");
  return verdict("bad", `Nowhere in the range do all limits hold${off}`, nearest ? missedWords(nearest, answer) : "");
}

const marginWords = ({ margin, error_bound: bound, result }, answer) => withUnit(shown(Math.abs(margin), Math.max(bound ?? 0, Math.abs(margin) * 1e-6)), unitOfMargin(result, answer));

/** The limits that are missed where they are missed least, and which of them hold at all. */
function missedWords({ value, missed, corner }, answer) {
  const { number } = answer.sizing;
  const each = missed.map((limit) => `${calledBy(limit)} by ${limit.margin < 0 ? marginWords(limit, answer) : "less than its error"}`);
  const never = missed.filter(({ holds_elsewhere: elsewhere }) => !elsewhere).map(calledBy);
  const why = never.length ? `${never.join(" and ")} ${never.length === 1 ? "holds" : "hold"} nowhere in the range.`
    : missed.length > 1 ? "Each of them holds elsewhere in the range, but not all at once." : "It holds elsewhere in the range, but not all others do there.";
  return `They are missed least at ${number.name} = ${withUnit(brief(value), number.unit)}: ${each.join(", ")}${corner ? `, the worst with ${numbersOf(corner).join(", ")}` : ""}. ${why}`;
}

/** A case of a tolerance zone. */
const numbersOf = (corner) => corner.map(({ number, unit, value }) => `${number} = ${withUnit(brief(value), unit)}`);

const tolerancesTable = (zones) => table("What may be off: limits hold at the corners of these tolerances and at the ends of each", ["Number", "As it stands", "Up", "Down"], zones.map(({ number, unit, nominal, plus, minus }) => [
  rowHead(headed(number, unit)), make("td", {}, nominal === null ? "is looked for" : brief(nominal)), make("td", {}, brief(plus)), make("td", {}, brief(minus))]), "wraps");

const EDGES = { target: "the value", range: "end of the range", invalid: "no result beyond" };

/** The case of a tolerance zone that is worst, line by line. */
const underCell = (corner) => (corner ? ["worst with", ...numbersOf(corner)].map((words) => make("span", { class: "known" }, words)) : null);

function edgeCell(edge) {
  return make("td", {}, shown(edge.value, edge.error_bound), make("span", { class: "known" }, edge.error_bound > 0 ? `\u00b1 ${bounded(edge.error_bound)}` : "exact"),
    make("span", { class: "known" }, edge.kind === "limit" ? calledBy(edge) : EDGES[edge.kind]), underCell(edge.corner));
}

function intervalsTable({ intervals, number }) {
  if (!intervals.length) return null;
  return table("Where all limits hold, and what ends it", ["", headed("From", number.unit), headed("To", number.unit)],
    intervals.map(({ low, high }, index) => [rowHead(intervals.length > 1 ? `interval ${index + 1}` : "interval"), edgeCell(low), edgeCell(high)]), "wraps");
}

const edgesTable = (edges, number, caption) => (edges.length ? table(caption, ["Value", headed(number.name, number.unit), "Slope there"],
  edges.map((edge, index) => [rowHead(String(index + 1)), valueCell(edge.value, edge.error_bound), valueCell(edge.slope, edge.slope_error_estimate)])) : null);

function sizesTable({ each, least, greatest }, number, answer) {
  const best = least === null ? "None of the sizes holds all limits for certain." : `The least that holds is ${withUnit(brief(least), number.unit)}, the greatest ${withUnit(brief(greatest), number.unit)}.`;
  return make("div", {}, table("Sizes that can be had", [headed("Size", number.unit), "Worst margin", "Holds"], each.map((size) => [
    rowHead(brief(size.value), size.message ?? calledBy(size)), size.margin === null ? make("td", {}, "\u2013") : marginCell(size, answer), make("td", {}, heldWord(size.held)),
  ]), "wraps"), make("p", { class: "hint" }, best));
}

const unitOfMargin = (name, { results, units }) => differenceOf(results.find((result) => result.name === name)?.unit ?? "1", units);

const marginCell = (size, answer) => make("td", {}, withUnit(shown(size.margin, size.error_bound ?? 0), unitOfMargin(size.result, answer)), underCell(size.corner));

/** Limits of a result as levels with their words. */
const levelsOf = (limits, name, isTarget) => limits.filter(({ result }) => result === name).flatMap(({ name: called, at_most: most, at_least: least }) => [
  ...(most === undefined ? [] : [[most, called ?? "at most"]]), ...(least === undefined ? [] : [[least, isTarget ? "wanted" : called ?? "at least"]]),
]);

function picture(answer, asked, { numbers, columns, limits }, { name, unit }) {
  const { sizing } = answer;
  const { number } = sizing;
  const column = columns.find((one) => one.name === name);
  const order = numbers[0].values.map((_, index) => index).sort((a, b) => numbers[0].values[a] - numbers[0].values[b]);
  const [x, y] = [order.map((index) => numbers[0].values[index]), order.map((index) => column.values[index])];
  const lines = levelsOf(limits, name, sizing.holds === null);
  const known = y.filter((value) => value !== null);
  const all = [...known, ...lines.map(([level]) => level)];
  const room = 0.08 * (Math.max(...all) - Math.min(...all) || 1);
  const isLogarithmic = asked.number.spread === "logarithmic";
  const band = (from, to, colour) => ({ type: "rect", yref: "paper", y0: 0, y1: 1, x0: from, x1: to, fillcolor: colour, line: { width: 0 }, layer: "below" });
  const drawn = lines.map(([level, words]) => limitLine(level, words));
  const edges = [...sizing.intervals.flatMap(({ low, high }) => [low, high]), ...sizing.solutions].filter(({ kind }) => kind === "limit" || kind === "target");
  return chart({
    label: `Curve of ${name} over ${number.name}, with its limits; where all limits hold is shaded. The numbers are in the tables that follow.`,
    caption: `${sizing.intervals.length ? `Shaded: all limits hold${sizing.tolerances ? " with all tolerances; the curve is without them" : ""}. ` : ""}Dashed: the limit. Thin: where an edge lies. The ring is the number as it stands.`,
    height: 340,
    data: [
      { type: "scatter", mode: "lines", x, y, connectgaps: false, line: { color: COLOURS.main, width: 2.2 }, hovertemplate: `%{x:.6~g} ${pretty(number.unit)}<br><b>%{y:.6~g} ${pretty(unit)}</b><extra></extra>` },
      { type: "scatter", mode: "markers", x: [number.as_it_stands], y: [answer.results.find((result) => result.name === name).value], marker: { size: 11, color: "#fffefa", line: { color: COLOURS.limit, width: 1.8 } }, hovertemplate: "as it stands<extra></extra>" },
    ],
    layout: {
      xaxis: axis(headed(number.name, number.unit), { type: isLogarithmic ? "log" : "linear", range: isLogarithmic ? [Math.log10(number.low), Math.log10(number.high)] : [number.low, number.high] }),
      yaxis: axis(headed(name, unit), { range: [Math.min(...all) - room, Math.max(...all) + room] }),
      shapes: [
        ...sizing.intervals.map(({ low, high }) => band(low.value, high.value, HELD_BAND)), ...sizing.invalid.map((part) => band(part.low, part.high, "rgba(125,135,137,0.25)")),
        ...drawn.map(({ shape }) => shape),
        ...edges.map(({ value }) => ({ type: "line", yref: "paper", y0: 0, y1: 1, x0: value, x1: value, line: { color: COLOURS.held, width: 1 } })),
      ],
      annotations: drawn.map(({ note }) => note),
    },
  });
}

const curveTable = ({ numbers: [number], columns }) => table("Cases along the number", [headed(number.name, number.unit), ...columns.map(({ name, unit }) => headed(name, unit))],
  number.values.map((value, row) => [rowHead(brief(value)), ...columns.map(({ values, error_bounds: bounds }) => valueCell(values[row], bounds[row]))]));
