/** A table of cases: results over the numbers as a picture, and every case in a table. */

import { axis, behind, chart, COLOURS, limitLine } from "./charts.js";
import { gridOf, mapOverBoth } from "./cases_map.js";
import { make, verdict } from "./elements.js";
import { brief, counted, pretty, shown } from "./numbers.js";
import { switched } from "./switched.js";
import { headed, heldWord, rowHead, table, valueCell } from "./tables.js";
import { PHYSICS } from "./words.js";

/** Longer tables are for programs, and are saved. */
const MOST_ROWS = 200;

/** @param {any} answer of POST /v1/cases */
export function casesView(answer) {
  const { numbers, columns, limits, failures } = answer;
  const grid = gridOf(numbers);
  const maps = grid ? columns.map((column) => [`${column.name} over both`, () => [mapOverBoth(answer, column, grid, PHYSICS[answer.potential])]]) : [];
  const curves = columns.flatMap((column) => numbers.map((number, index) => [
    numbers.length > 1 ? `${column.name} over ${number.name}` : column.name, () => [picture(answer, column, number, index)],
  ]));
  return [
    ...summary(answer),
    switched("Picture", grid && Math.min(grid.across.length, grid.up.length) > MOST_CURVES ? [...maps, ...curves] : [...curves, ...maps], "cases-shown"),
    failures.length ? failureList(failures) : null,
    behind(`All ${counted(answer.case_count)} cases`, casesTable({ numbers, columns, limits })),
  ].filter(Boolean);
}

function summary({ limits, case_count: count }) {
  return limits.map(({ name, result, held }) => {
    const yes = held.filter((word) => word === "yes").length;
    const kind = yes === count ? "good" : yes ? "open" : "bad";
    return verdict(kind, name ?? result, `Holds for certain in ${yes} of ${count} cases.`);
  });
}

const failureList = (failures) => make("div", {},
  verdict("open", failures.length === 1 ? "One case could not be computed" : `${failures.length} cases could not be computed`, ""),
  make("ul", { class: "reasons" }, failures.slice(0, 10).map(({ case: index, message }) => make("li", {}, `Case ${index}: ${message}`))));

/** All but one number together, to tell cases of one curve. */
const othersOf = (numbers, own, row) => numbers.filter((_, index) => index !== own)
  .map(({ name, values, unit }) => `${name} ${brief(values[row])}${unit === "1" ? "" : ` ${pretty(unit)}`}`).join(", ");

const MOST_CURVES = 8;

/** Curves along one number where the others keep their values over several cases; points otherwise. */
function picture({ numbers, limits }, column, number, own) {
  const curves = new Map();
  number.values.forEach((_, row) => {
    const key = othersOf(numbers, own, row);
    if (!curves.has(key)) curves.set(key, []);
    curves.get(key).push(row);
  });
  const isCurves = curves.size <= MOST_CURVES && [...curves.values()].every((rows) => rows.length > 1);
  const trace = (name, rows, colour, mode) => {
    const sorted = [...rows].sort((a, b) => number.values[a] - number.values[b]);
    return {
      type: "scatter", mode, name: name.replace(/[<>&]/g, " "), x: sorted.map((row) => number.values[row]), y: sorted.map((row) => column.values[row]), connectgaps: false,
      customdata: sorted.map((row) => `case ${row}${name ? `: ${othersOf(numbers, own, row).replace(/[<>&]/g, " ")}` : ""}`),
      line: { color: colour, width: 2 }, marker: { color: colour, size: rows.length > 60 ? 5 : 7 },
      hovertemplate: `%{x:.6~g} ${pretty(number.unit)}<br><b>%{y:.6~g} ${pretty(column.unit)}</b><br>%{customdata}<extra></extra>`,
    };
  };
  const colours = [COLOURS.main, COLOURS.second, COLOURS.limit, COLOURS.held, "#7a4f9a", "#8a6d00", COLOURS.quiet, "#c0763f"];
  const dashes = ["solid", "dash", "dot", "dashdot", "longdash", "longdashdot", "solid", "dash"];
  const data = isCurves
    ? [...curves].map(([name, rows], index) => {
      const drawn = trace(name, rows, colours[index], "lines+markers");
      drawn.line.dash = dashes[index];
      return drawn;
    })
    : [trace(" ", number.values.map((_, row) => row), COLOURS.main, "markers")];
  const drawn = limits.filter(({ result }) => result === column.name).flatMap(({ name, at_most: most, at_least: least }) => [
    ...(most === undefined ? [] : [limitLine(most, name ?? "at most")]), ...(least === undefined ? [] : [limitLine(least, name ?? "at least")]),
  ]);
  const hasLegend = isCurves && curves.size > 1;
  return chart({
    label: `${column.name} over ${number.name} for every case. The numbers are in the table that follows.`,
    caption: isCurves ? "Lines only join what was computed." : "A point for each case.",
    height: 340 + (hasLegend ? 24 * Math.ceil(curves.size / 2) : 0), data,
    layout: {
      xaxis: axis(headed(number.name, number.unit)), yaxis: axis(headed(column.name, column.unit)), showlegend: hasLegend,
      shapes: drawn.map(({ shape }) => shape), annotations: drawn.map(({ note }) => note),
    },
  });
}

/** @param {{numbers: any[], columns: any[], limits?: any[], case?: number[]}} cases */
export function casesTable({ numbers, columns, limits = [], case: given }) {
  const what = given ? "cases that are done" : "cases";
  const count = numbers[0]?.values.length ?? 0;
  const rows = Array.from({ length: Math.min(count, MOST_ROWS) }, (_, row) => [
    rowHead(String(given ? given[row] : row)), ...numbers.map(({ values }) => make("td", {}, shown(values[row]))),
    ...columns.map(({ values, error_bounds: bounds }) => valueCell(values[row], bounds[row])),
    ...limits.map(({ held }) => make("td", {}, heldWord(held[row]))),
  ]);
  const heads = ["Case", ...[...numbers, ...columns].map(({ name, unit }) => headed(name, unit)), ...limits.map(({ name, result }) => name ?? result)];
  return table(count > MOST_ROWS ? `The first ${MOST_ROWS} of ${counted(count)} ${what}` : `All ${what}`, heads, rows, "wraps");
}
