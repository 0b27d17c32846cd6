/** What readings say: the unknowns with their uncertainty, what cannot be told apart, and what is left over. */

import { axis, behind, chart, COLOURS, inLines } from "./charts.js";
import { make, verdict } from "./elements.js";
import { bounded, brief, counted, pretty, shown } from "./numbers.js";
import { switched } from "./switched.js";
import { headed, rowHead, table, withUnit } from "./tables.js";
import { PHYSICS } from "./words.js";

/** A value with the digits its uncertainty leaves. */
const within = (value, uncertainty) => shown(value, uncertainty ? 10 ** (Math.floor(Math.log10(uncertainty)) - 1) : Math.abs(value) * 1e-4);
const percent = (part) => `${Number((100 * part).toPrecision(2))} %`;

/** @param {any} answer of POST /v1/calibration */
export function calibrationView(answer) {
  const { calibration: found, units } = answer;
  const contributions = found.unknowns.filter(({ is_told: told }) => told).map((one) => [one.name, () => [contributionBars(one, found.readings)]]);
  return [
    consistencyVerdict(found.consistency),
    ...found.known_together.map(togetherVerdict),
    found.unknowns.length ? unknownsTable(found) : null,
    ...found.unknowns.filter(({ name }) => !found.known_together.some(({ numbers, are_told: told }) => !told && numbers.includes(name))).flatMap(cautions),
    found.smooth_map ? mapView(found.smooth_map, units, PHYSICS[answer.potential]) : null,
    leftOver(found.readings),
    contributions.length ? switched("What the readings contribute to", contributions, "calibration-shown") : null,
    ...otherSolutions(found),
    found.settled ? null : verdict("open", "Not settled", "The search did not come to its end; give it more starts or a narrower range."),
    behind("Readings and what is left over", readingsTable(found.readings)),
    behind("Results with what was found", predictedTable(found.results)),
    found.unknowns.length > 1 ? behind("Correlation of the unknowns", correlationTable(found)) : null,
    make("p", { class: "hint" }, `${counted(found.case_count)} cases. ${found.linear ? "All readings follow the unknowns in proportion, so this is the only solution." : `The starts led to ${found.minima_count === 1 ? "one solution" : `${found.minima_count} solutions`}.`}`),
  ].filter(Boolean);
}

function consistencyVerdict({ verdict: word, sentence, scaled_by: scaled }) {
  const [kind, title] = { consistent: ["good", "Consistent"], contradiction: ["bad", "Contradiction"], too_close: ["open", "Closer than expected"], untested: ["open", "Not tested"] }[word];
  return verdict(kind, title, `${sentence}${scaled === 1 ? "" : ` Uncertainties were multiplied by ${brief(Number(scaled.toPrecision(3)))}.`}`);
}

function togetherVerdict({ numbers, expression, value, standard_uncertainty: uncertainty, are_told: told, holds, near = [] }) {
  const places = numbers.map((name, index) => `${name} = ${brief(Number((near[index] ?? NaN).toPrecision(4)))}`).join(" and ");
  const where = { near: `, near ${places} only, that `, not_followed: `, near ${places}, that ` }[holds] ?? " ";
  const known = `${within(value, uncertainty)}${uncertainty === null ? "" : ` \u00b1 ${bounded(uncertainty)}`}`;
  return verdict("open", `${numbers.join(" and ")} ${told ? "are hardly told apart" : "cannot be told apart"}`,
    `The readings tell${where}${expression} = ${known}${told ? ", and each by itself much less well" : ", and nothing of each by itself"}. A reading elsewhere, or a value from a data sheet, may part them.`);
}

function unknownsTable({ unknowns }) {
  const interval = (one) => (one === null || one === undefined ? "\u2013" : [one.low, one.high].map((end) => (end === null ? "?" : brief(Number(end.toPrecision(4))))).join(" to "));
  const hasProfile = unknowns.some(({ profile_interval: profile }) => profile);
  return table("Unknowns as the readings have them, with standard uncertainty and 95 % interval", ["Unknown", "Value", "Interval", ...(hasProfile ? ["By the sum of squares"] : [])], unknowns.map((one) => [
    rowHead(headed(one.name, one.unit), one.at_end ? `at the ${one.at_end === "low" ? "lower" : "upper"} end of its range` : null),
    one.is_told ? make("td", {}, make("strong", {}, within(one.value, one.standard_uncertainty)), make("span", { class: "known" }, one.standard_uncertainty === null ? "" : `\u00b1 ${bounded(one.standard_uncertainty)} ${one.unit_of_uncertainty === one.unit ? "" : pretty(one.unit_of_uncertainty)}`))
      : make("td", { class: "no-value" }, "not told"),
    make("td", {}, interval(one.interval)), ...(hasProfile ? [make("td", {}, interval(one.profile_interval))] : []),
  ]), "wraps");
}

function cautions({ name, is_told: told, departure_from_linear: bent, profile_interval: profile, known_before_part: before }) {
  return [
    told ? null : verdict("open", `${name} is not told`, "The readings, with what was known before, tell no more of it than its range."),
    told && bent > 0.15 && !profile ? verdict("open", `The interval of ${name} is rough`, "The results bend within it; ask for intervals by the sum of squares.") : null,
    told && before > 0.5 ? verdict("open", `${name} rests on what was known before`, `${percent(before)} of its variance does not come from the readings.`) : null,
  ].filter(Boolean);
}

/** What is left over of each reading, in standard uncertainties of it. */
function leftOver(readings) {
  const rows = readings.map((one, index) => ({ ...one, row: `${inLines(one.result)}${readings.findIndex(({ result }) => result === one.result) === index ? "" : ` (${index + 1})`}` })).filter(({ normalised }) => normalised !== null).reverse();
  if (!rows.length) return null;
  const most = Math.max(2.6, ...rows.map(({ normalised }) => Math.abs(normalised))) * 1.1;
  const spots = (isOutlier) => {
    const some = rows.filter((one) => one.is_outlier === isOutlier);
    return {
      type: "scatter", mode: "markers", x: some.map(({ normalised }) => normalised), y: some.map(({ row }) => row),
      marker: isOutlier ? { symbol: "x", size: 12, color: COLOURS.missed } : { size: 10, color: COLOURS.main },
      customdata: some.map((one) => `read ${brief(one.value)}, computed ${brief(Number(one.computed.toPrecision(6)))} ${pretty(one.unit)}`), hovertemplate: "%{customdata}<extra></extra>",
    };
  };
  return chart({
    label: "What is left over of each reading, in standard uncertainties. The numbers are in the table that follows.",
    caption: `Reading less result, in standard uncertainties; nineteen of twenty are expected in the shaded band.${rows.some(({ is_outlier: out }) => out) ? " Crosses stand out." : ""}`,
    height: 90 + 28 * rows.length, data: [spots(false), spots(true)],
    layout: {
      xaxis: axis("left over, in standard uncertainties", { range: [-most, most], zeroline: true, zerolinecolor: COLOURS.limit }),
      yaxis: axis("", { ticks: "", showline: false, type: "category", categoryorder: "array", categoryarray: rows.map(({ row }) => row), range: [-0.6, rows.length - 0.4] }),
      shapes: [{ type: "rect", yref: "paper", y0: 0, y1: 1, x0: -1.96, x1: 1.96, fillcolor: "rgba(29, 97, 56, 0.12)", line: { width: 0 }, layer: "below" }],
    },
  });
}

function contributionBars({ name, shares, shared_shares: shared, known_before_part: before }, readings) {
  const parts = [
    ...shares.map((part, index) => ({ part, words: readings[index].result })), ...shared.map(({ part }) => ({ part, words: "shared error" })),
    ...(before > 0 ? [{ part: before, words: "known before" }] : []),
  ].filter(({ part }) => part !== null).sort((a, b) => b.part - a.part).slice(0, 12).reverse();
  return chart({
    label: `Bars: what part of the variance of ${name} comes from each reading, the largest on top.`,
    caption: `Part of the variance of ${name} that comes from each reading: the ones with long bars matter most.`,
    height: 80 + 30 * parts.length,
    data: [{ type: "bar", orientation: "h", x: parts.map(({ part }) => part), y: parts.map((_, index) => index), marker: { color: COLOURS.second }, hovertemplate: "%{x:.1%}<extra></extra>" }],
    layout: { bargap: 0.35, xaxis: axis("part of the variance", { tickformat: ".0%", rangemode: "tozero" }), yaxis: axis("", { ticks: "", showline: false, tickvals: parts.map((_, index) => index), ticktext: parts.map(({ words }) => inLines(words)) }) },
  });
}

/** A map that was found: its entries, with those that the readings leave open crossed. */
function mapView({ name, unit, unit_of_uncertainty: step, axes, table: values, standard_uncertainties: uncertainties, open, open_count: count, not_told_from: confounded, told_numbers: told }, units, words) {
  const [[first, rows], [second, columns]] = Object.entries(axes);
  const crosses = rows.flatMap((x, i) => columns.flatMap((y, j) => (open[i][j] ? [[x, y]] : [])));
  const stops = words.scale.map((colour, index) => [index / (words.scale.length - 1), colour]);
  const caption = `Found: ${name}, ${pretty(unit)}.${count ? ` Crosses: ${count} entries that the readings leave open.` : ""} The readings tell about ${brief(Number(told.toPrecision(2)))} independent numbers of it.`;
  return make("div", {},
    chart({
      label: `Map of ${name}. Its entries are in the table that follows.`, caption, height: 360,
      data: [
        {
          type: "heatmap", x: rows, y: columns, z: columns.map((_, j) => rows.map((__, i) => values[i][j])), zsmooth: "best", colorscale: stops, colorbar: { title: { text: pretty(unit), side: "right" }, thickness: 14 },
          hovertemplate: `${first} = %{x:.5~g}, ${second} = %{y:.5~g} ${pretty(units.length)}<br><b>%{z:.5~g} ${pretty(unit)}</b><extra></extra>`,
        },
        { type: "scatter", mode: "markers", x: crosses.map(([x]) => x), y: crosses.map(([, y]) => y), marker: { symbol: "x-thin", size: 9, line: { color: COLOURS.limit, width: 1.6 } }, hovertemplate: "left open by the readings<extra></extra>" },
      ],
      layout: {
        xaxis: axis(`${first}, ${pretty(units.length)}`, { showgrid: false, range: [rows[0], rows.at(-1)], constrain: "domain" }),
        yaxis: axis(`${second}, ${pretty(units.length)}`, { showgrid: false, range: [columns[0], columns.at(-1)], scaleanchor: "x", constrain: "domain" }),
      },
    }),
    confounded.length ? verdict("open", "Not told from the map", `The readings do not tell ${confounded.join(", ")} from the map; the map stands for the values these have.`) : null,
    behind("Entries of the map", table(`${name}, ${pretty(unit)}, with standard uncertainties${step === unit ? "" : ` in ${pretty(step)}`}; ${first} and ${second} in ${pretty(units.length)}`, [`${first} \\ ${second}`, ...columns.map(brief)], rows.map((place, i) => [
      rowHead(brief(place)), ...columns.map((_, j) => make("td", {}, within(values[i][j], uncertainties[i][j]), make("span", { class: "known" }, open[i][j] ? "open" : `\u00b1 ${bounded(uncertainties[i][j])}`)))]))),
  );
}

function otherSolutions({ other_solutions: others, unknowns }) {
  return others.map(({ values, chi_squared: squares }) => verdict("open", "Another solution is not ruled out",
    `${values.map((value, index) => `${unknowns[index].name} = ${withUnit(brief(Number(value.toPrecision(4))), unknowns[index].unit)}`).join(", ")}; its sum of squares is ${brief(Number(squares.toPrecision(3)))}.`));
}

const readingsTable = (readings) => table("Each reading beside the result with what was found", ["Reading", "Read", "Computed", "Left over", "Weight in the fit"], readings.map((one) => [
  rowHead(headed(one.result, one.unit), one.is_outlier ? "stands out" : null), make("td", {}, brief(one.value), make("span", { class: "known" }, `\u00b1 ${bounded(one.standard_uncertainty)}`)),
  make("td", {}, within(one.computed, one.standard_uncertainty)), make("td", {}, within(one.left_over, one.standard_uncertainty)), make("td", {}, percent(one.leverage))]), "wraps");

const predictedTable = (results) => table("All results with what was found, and what the uncertainty of the unknowns makes of them", ["Result", "Value", "Standard uncertainty"], results.map((one) => [
  rowHead(headed(one.name, one.unit)), make("td", {}, within(one.value, one.standard_uncertainty)),
  make("td", {}, one.standard_uncertainty === null ? "not told" : withUnit(bounded(one.standard_uncertainty), one.unit_of_uncertainty))]));

const correlationTable = ({ unknowns, correlation }) => table("Correlation coefficients: near 1 or \u22121 two unknowns are hardly told apart", ["", ...unknowns.map(({ name }) => name)], correlation.map((row, index) => [
  rowHead(unknowns[index].name), ...row.map((value) => make("td", {}, value === null ? "\u2013" : brief(Number(value.toFixed(4)))))]), "wraps");
