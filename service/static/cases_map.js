/** A result over two numbers of which every combination was computed: a tinted map with lines of equal value. */

import { axis, chart, COLOURS, plainly } from "./charts.js";
import { evenStep, pretty } from "./numbers.js";
import { FONT, INK } from "./picture.js";
import { headed, withUnit } from "./tables.js";

const FEWEST = 3;

/**
 * The two numbers' values and the rows of cases between them, or null where the cases are no such grid.
 * @param {any[]} numbers columns of an answer
 */
export function gridOf(numbers) {
  if (numbers.length !== 2) return null;
  const [across, up] = numbers.map(({ values }) => [...new Set(values)].sort((a, b) => a - b));
  const count = numbers[0].values.length;
  if (across.length < FEWEST || up.length < FEWEST || across.length * up.length !== count) return null;
  const rows = up.map(() => across.map(() => -1));
  numbers[0].values.forEach((value, row) => {
    rows[up.indexOf(numbers[1].values[row])][across.indexOf(value)] = row;
  });
  return rows.flat().includes(-1) ? null : { across, up, rows };
}

/** @param {any} answer of POST /v1/cases @param {any} column a result @param {{across: number[], up: number[], rows: number[][]}} grid @param {any} words of the physics */
export function mapOverBoth({ numbers: [first, second], limits }, column, { across, up, rows }, { scale }) {
  const z = rows.map((row) => row.map((index) => column.values[index]));
  const known = z.flat().filter((value) => value !== null);
  const [least, most] = [Math.min(...known), Math.max(...known)];
  const stops = scale.map((colour, index) => [index / (scale.length - 1), colour]);
  const lines = (start, end, size, line, more) => ({
    type: "contour", x: across, y: up, z, autocontour: false, showscale: false, hoverinfo: "skip", contours: { coloring: "none", showlabels: true, labelfont: { ...FONT, size: 12 }, start, end, size }, line, ...more,
  });
  const step = evenStep(most - least || 1, 7);
  const levels = limits.filter(({ result }) => result === column.name).flatMap(({ at_most: high, at_least: low }) => [high, low]).filter((level) => level > least && level < most);
  return chart({
    label: `${column.name} over ${first.name} and ${second.name}, with lines of equal value. The numbers are in the table that follows.`,
    caption: `${column.name}, ${pretty(column.unit)}. Between the cases, which the dots are, tint and lines only join what was computed.${levels.length ? " Heavy: the limit." : ""}`,
    height: 380,
    data: [
      {
        type: "heatmap", x: across, y: up, z, zsmooth: "best", colorscale: stops, showscale: false,
        hovertemplate: `${[["x", first], ["y", second], ["z", column]].map(([place, { name, unit }]) => plainly(`${name} ${withUnit(`%{${place}:.6~g}`, unit)}`)).join("<br>")}<extra></extra>`,
      },
      lines(Math.ceil(least / step) * step, most, step, { color: INK, width: 0.8 }),
      ...levels.map((level) => lines(level, level, 1, { color: COLOURS.main, width: 3 })),
      { type: "scatter", mode: "markers", x: up.flatMap(() => across), y: up.flatMap((value) => across.map(() => value)), marker: { size: 3, color: INK }, hoverinfo: "skip" },
    ],
    layout: {
      xaxis: axis(headed(first.name, first.unit), { showgrid: false, range: [across[0], across.at(-1)] }), yaxis: axis(headed(second.name, second.unit), { showgrid: false, range: [up[0], up.at(-1)] }),
    },
  });
}
