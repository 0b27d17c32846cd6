/** Which values of one number will do: the result over the number, its limits, and where all of them hold. */

import { axis, behind, chart, COLOURS, HELD_BAND, limitLine } from "./charts.js";
import { make, verdict } from "./elements.js";
import { bounded, brief, pretty, shown } from "./numbers.js";
import { switched } from "./switched.js";
import { differenceOf, headed, heldWord, rowHead, table, valueCell, withUnit } from "./tables.js";

/**
 * The cases that draw the curve: the answer itself tells only where it crosses. Limits come back in the units of results.
 * @param {any} request of POST /v1/sizing, as it was answered @param {any} answer @param {number} points how many
 */
export function curveRequest(request, answer, points) {
  const { low, high, name } = answer.sizing.number;
  const { spread, low: typedLow, high: typedHigh, count, plus_minus: both, plus, minus, ...reference } = request.number;
  const part = (index) => index / (points - 1);
  const value = spread === "logarithmic" ? (index) => low * (high / low) ** part(index) : (index) => low + (high - low) * part(index);
  const values = Array.from({ length: points }, (_, index) => (index === points - 1 ? high : value(index)));
  const { problem, results, accuracy, target } = request;
  const limits = target ? [{ result: target.result, at_least: target.equals }] : request.limits;
  return { problem, results, numbers: [{ ...reference, name }], cases: { table: "grid", values: [values] }, limits, accuracy };
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
    verdictOf(sizing, asked),
    cases ? switched("Result", pictures, "sizing-shown") : make("p", { class: "hint" }, cases === null ? "There is no picture: its cases would take too long." : "The picture follows."),
    isTarget ? edgesTable(sizing.solutions, number, "Where the result has its value") : intervalsTable(sizing, asked),
    ...sizing.touches.map((touch) => verdict("open", "Touched", `Between ${brief(touch.low)} and ${withUnit(brief(touch.high), number.unit)} the limit on ${touch.result ?? "the result"} is met to within the errors, so it is left open whether it is passed.`)),
    ...sizing.invalid.map((part) => verdict("open", `No result from ${brief(part.low)} to ${withUnit(brief(part.high), number.unit)}`, part.message)),
    sizing.sizes ? sizesTable(sizing.sizes, number, answer) : null,
    cases ? behind("Values behind the picture", curveTable(cases)) : null,
  ].filter(Boolean);
}

function verdictOf({ holds, number, intervals, nearest, solutions }, asked) {
  const at = (value) => withUnit(brief(value), number.unit);
  if (holds === null) {
    if (solutions.length) return verdict("good", solutions.length === 1 ? "One value will do" : `${solutions.length} values will do`, `${number.name} = ${solutions.map(({ value }) => at(value)).join(", ")}.`);
    return verdict("bad", "Not reached", `In the range the result never has this value${nearest ? `; it comes nearest at ${number.name} = ${at(nearest.value)}` : ""}.`);
  }
  if (holds === "everywhere") return verdict("good", "All limits hold in the whole range", `From ${at(number.low)} to ${at(number.high)}.`);
  if (holds === "somewhere") {
    const parts = intervals.map(({ low, high }) => `from ${at(Number(low.value.toPrecision(6)))} to ${at(Number(high.value.toPrecision(6)))}`);
    return verdict("good", parts.length === 1 ? "All limits hold in one interval" : `All limits hold in ${parts.length} intervals`, `${number.name} ${parts.join(", and ")}.`);
  }
  if (holds === "undecided") return verdict("open", "Undecided", "Nowhere for certain, but perhaps where a limit is touched.");
  const missed = nearest ? ` The worst limit${nearest.limit === null ? "" : `, ${asked.limits[nearest.limit].name ?? nearest.result},`} is missed least at ${number.name} = ${at(nearest.value)}, by ${brief(Math.abs(nearest.margin))}.` : "";
  return verdict("bad", "Nowhere in the range do all limits hold", missed);
}

const EDGES = { limit: "a limit", target: "the value", range: "end of the range", invalid: "no result beyond" };

function edgeCell(edge, asked) {
  const why = edge.kind === "limit" && edge.limit !== null ? asked.limits?.[edge.limit]?.name ?? edge.result : EDGES[edge.kind];
  return make("td", {}, shown(edge.value, edge.error_bound), make("span", { class: "known" }, edge.error_bound > 0 ? `\u00b1 ${bounded(edge.error_bound)}` : "exact"),
    make("span", { class: "known" }, why));
}

function intervalsTable({ intervals, number }, asked) {
  if (!intervals.length) return null;
  return table("Where all limits hold, and what ends it", ["", headed("From", number.unit), headed("To", number.unit)],
    intervals.map(({ low, high }, index) => [rowHead(intervals.length > 1 ? `interval ${index + 1}` : "interval"), edgeCell(low, asked), edgeCell(high, asked)]), "wraps");
}

const edgesTable = (edges, number, caption) => (edges.length ? table(caption, ["Value", headed(number.name, number.unit), "Slope there"],
  edges.map((edge, index) => [rowHead(String(index + 1)), valueCell(edge.value, edge.error_bound), valueCell(edge.slope, edge.slope_error_estimate)])) : null);

function sizesTable({ each, least, greatest }, number, answer) {
  const best = least === null ? "None of the sizes holds all limits for certain." : `The least that holds is ${withUnit(brief(least), number.unit)}, the greatest ${withUnit(brief(greatest), number.unit)}.`;
  return make("div", {}, table("Sizes that can be had", [headed("Size", number.unit), "Worst margin", "Holds"], each.map((size) => [
    rowHead(brief(size.value), size.message ?? size.result), size.margin === null ? make("td", {}, "\u2013") : marginCell(size, answer), make("td", {}, heldWord(size.held)),
  ]), "wraps"), make("p", { class: "hint" }, best));
}

function marginCell(size, { results, units }) {
  const unit = differenceOf(results.find(({ name }) => name === size.result)?.unit ?? "1", units);
  return make("td", {}, withUnit(shown(size.margin, size.error_bound ?? 0), unit));
}

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
    caption: `${sizing.intervals.length ? "Shaded: all limits hold. " : ""}Dashed: the limit. Thin: where an edge lies. The ring is the number as it stands.`,
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
