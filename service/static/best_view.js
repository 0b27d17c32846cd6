/** The best values that were found: before and after, and the limits that bind. */

import { axis, behind, chart, COLOURS, inLines } from "./charts.js";
import { make, verdict } from "./elements.js";
import { bounded, brief, counted, pretty, shown } from "./numbers.js";
import { placement } from "./placement.js";
import { differenceOf, headed, heldWord, limitWords, rowHead, table, valueCell, withUnit } from "./tables.js";
import { PHYSICS } from "./words.js";

/** Digits of a number that a search has found: more would only say where it stopped. */
const found = (value) => brief(Number(value.toPrecision(5)));

/** @param {any} answer of POST /v1/best-values @param {any} asked its request */
export function bestView(answer, asked) {
  const { best_values: outcome, results, units } = answer;
  const { best } = outcome;
  if (!best) return [verdict("bad", "No values were found", outcome.reason ?? ""), searchesTable(outcome, asked)];
  return [
    goalVerdict(best, asked, units),
    best.all_held === "no" ? verdict("bad", "No values were found with which all limits hold", "These miss them least.") : null,
    outcome.complete ? null : verdict("open", "Stopped early", "As many cases were computed as were allowed; more may find better values."),
    numbersTable(best.numbers),
    beforeAfter(best, results, asked, units),
    placement(asked, best.numbers, units),
    best.limits.length ? limitsTable(best.limits, best.results, units) : null,
    ...best.apart.map(({ least_distance: distance, gap }) => make("p", { class: "hint" }, `The nearest two are ${withUnit(found(distance), units.length)} apart; asked for is ${withUnit(brief(gap), units.length)}.`)),
    make("p", { class: "hint" }, `${counted(outcome.case_count)} cases, ${counted(outcome.failed_count)} of them without a result; ${outcome.same_goal_count} of ${outcome.searches.length} searches came to the same. Nothing is proved of values far from where they began.`),
    behind("Searches, and results before and after", searchesTable(outcome, asked), resultsTable(best.results, results)),
  ].filter(Boolean);
}

function goalVerdict(best, asked, units) {
  const { goal } = best;
  const step = differenceOf(goal.unit, units);
  const what = `The ${asked.goal.minimise ? "largest" : "least"} is ${withUnit(shown(goal.value, Math.max(goal.error_bound, goal.search_error_estimate ?? 0)), goal.unit)}, that of ${goal.leading.join(" and ")}`;
  if (best.all_held === "no") return verdict("open", "What is missed least", `${what}; that is no improvement on anything that holds the limits.`);
  const gain = goal.improvement === null ? "; the numbers as they stand lie outside their ranges." : `, where it is ${withUnit(brief(Number(goal.as_it_stands.toPrecision(6))), goal.unit)} as it stands: ${goal.improvement >= 0 ? "better" : "worse"} by ${withUnit(found(Math.abs(goal.improvement)), step)}.`;
  return verdict(goal.improvement === null || goal.improvement >= 0 ? "good" : "open", "Best values found", `${what}${gain} ${goal.search_error_estimate === null ? "How much better it could be nearby is not known." : `Nearby it could be better by about ${bounded(goal.search_error_estimate)} ${pretty(step)} at most.`}`);
}

const numbersTable = (numbers) => table("Numbers before and after", ["Number", "As it stands", "Best"], numbers.map((one) => [
  rowHead(headed(one.name, one.unit), one.at_end ? `at the ${one.at_end === "low" ? "lower" : "upper"} end of its range: a wider one would do better` : null),
  make("td", {}, brief(one.as_it_stands)), make("td", {}, make("strong", {}, found(one.value)))]), "wraps");

/** The results of the goal, as they stand and with the best values. */
function beforeAfter(best, before, asked, units) {
  const words = units.potential === best.goal.unit ? PHYSICS[asked.problem.potential].potential.toLowerCase() : "result";
  const names = asked.goal.minimise ?? asked.goal.maximise;
  const rows = names.map((name) => ({ name, from: before.find((one) => one.name === name).value, to: best.results.find((one) => one.name === name).value })).reverse();
  const limits = best.limits.filter(({ result }) => names.includes(result));
  const marks = limits.flatMap(({ result, at_most: most, at_least: least }) => [most, least].filter((level) => level !== undefined).map((level) => ({ result, level })));
  return chart({
    label: "The results that are to be best, as they stand and with the best values. The numbers are in the table that follows.",
    caption: `Ring: as it stands; dot: with the best values${marks.length ? "; upright stroke: its limit" : ""}.`,
    height: 96 + 34 * rows.length,
    data: [
      ...rows.map(({ name, from, to }) => ({ type: "scatter", mode: "lines", x: [from, to], y: [inLines(name), inLines(name)], line: { color: COLOURS.tint, width: 4 }, hoverinfo: "skip" })),
      { type: "scatter", mode: "markers", x: rows.map(({ from }) => from), y: rows.map(({ name }) => inLines(name)), marker: { size: 11, color: "#fffefa", line: { color: COLOURS.limit, width: 1.8 } }, hovertemplate: `as it stands: %{x:.6~g} ${pretty(best.goal.unit)}<extra></extra>` },
      { type: "scatter", mode: "markers", x: rows.map(({ to }) => to), y: rows.map(({ name }) => inLines(name)), marker: { size: 12, color: COLOURS.main }, hovertemplate: `best: %{x:.6~g} ${pretty(best.goal.unit)}<extra></extra>` },
      { type: "scatter", mode: "markers", x: marks.map(({ level }) => level), y: marks.map(({ result }) => inLines(result)), marker: { symbol: "line-ns", size: 22, line: { color: COLOURS.limit, width: 2.5 } }, hovertemplate: `limit: %{x:.6~g} ${pretty(best.goal.unit)}<extra></extra>` },
    ],
    layout: { xaxis: axis(headed(words, best.goal.unit)), yaxis: axis("", { ticks: "", showline: false, range: [-0.6, rows.length - 0.4] }) },
  });
}

const limitsTable = (limits, results, units) => table("Limits with the best values", ["Limit", "Margin", "Holds"], limits.map((limit) => {
  const { unit } = results.find(({ name }) => name === limit.result);
  const words = `${limit.name ? `${limit.result} ` : ""}${limitWords(limit, unit)}`;
  return [
    rowHead(limit.name ?? limit.result, limit.binds ? `${words}; it binds: without it better values can be had` : words),
    make("td", {}, withUnit(brief(Number(limit.margin.toPrecision(4))), differenceOf(unit, units))), make("td", {}, heldWord(limit.held)),
  ];
}), "limits");

const searchesTable = ({ searches }, asked) => table("Local searches, the best first", ["Search", ...asked.numbers.map(({ name }) => name), "Goal", "Ended"], searches.map((one, index) => [
  rowHead(String(index + 1), one.same_numbers ? "same as the best" : one.same_goal ? "same goal elsewhere" : null), ...one.last.map((value) => make("td", {}, found(value))), make("td", {}, brief(Number(one.last_goal.toPrecision(7)))), make("td", {}, one.ended)]), "wraps");

const resultsTable = (after, before) => table("Every result before and after", ["Result", "As it stands", "With the best values"], after.map((one, index) => [
  rowHead(headed(one.name, one.unit)), valueCell(before[index].value, before[index].error_bound), valueCell(one.value, one.error_bound)]));
