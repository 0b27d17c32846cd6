/** What each number does to each result: bars in the order of their size, and the table behind them. */

import { axis, behind, chart, COLOURS, inLines } from "./charts.js";
import { make, verdict } from "./elements.js";
import { brief, pretty } from "./numbers.js";
import { switched } from "./switched.js";
import { differenceOf, headed, rowHead, table, valueCell, withUnit } from "./tables.js";

/** A change to compare numbers by: a hundredth, or one unit where a number counts from no zero of its own. */
function changeOf({ unit, nominal }, units) {
  const isLevel = unit === units.potential && unit !== units.potential_difference;
  if (nominal === 0 || isLevel) return { change: 1, words: withUnit("1", differenceOf(unit, units)) };
  return { change: Math.abs(nominal) / 100, words: `1 %, ${withUnit(brief(Math.abs(nominal) / 100), unit)}` };
}

/** @param {any} answer of POST /v1/sensitivities */
export function sensitivitiesView(answer) {
  const { results, numbers, derivatives, units } = answer;
  const failed = numbers.filter(({ reason }) => reason);
  const ofResult = (name) => derivatives.filter(({ result }) => result === name).map((one, index) => {
    const { change, words } = changeOf(numbers[index], units);
    return { ...one, words, effect: one.derivative === null ? null : one.derivative * change };
  });
  const view = ({ name, unit }) => {
    const ranked = ofResult(name).filter(({ effect }) => effect !== null).sort((a, b) => Math.abs(b.effect) - Math.abs(a.effect));
    const kinks = ranked.filter(({ smooth }) => !smooth);
    return [
      bars(name, differenceOf(unit, units), ranked),
      kinks.length ? verdict("open", "A kink", `The result bends sharply where it stands, by ${kinks.map(({ number }) => number).join(", ")}: two places compete. The slopes on both sides are in the table.`) : null,
    ].filter(Boolean);
  };
  return [
    make("p", { class: "hint" }, "How far a result moves when one number grows by a hundredth, or by one unit where a hundredth means nothing, and all else stays."),
    switched("Result", results.map((result) => [result.name, () => view(result)]), "sensitivities-result"),
    ...failed.map(({ name, reason }) => verdict("open", `${name} could not be varied`, reason.message)),
    behind("Slopes with their errors", table("Change of each result per unit of each number", ["Result and number", "Slope", "Per cent for one per cent", "Change of slope"], derivatives.map((one) => [
      rowHead(one.number, `on ${one.result}, ${pretty(one.unit)}`),
      valueCell(one.derivative, one.error_estimate, one.smooth ? {} : { title: "at a kink: the mean of both sides" }),
      make("td", {}, one.relative === null ? "\u2013" : brief(Number(one.relative.toPrecision(4)))),
      one.smooth ? valueCell(one.second_derivative, one.second_error_estimate)
        : make("td", {}, one.below === null ? "\u2013" : `${brief(one.below)} below, ${brief(one.above)} above`)]))),
  ];
}

function bars(name, unit, ranked) {
  const shown = ranked.slice(0, 20).reverse();
  return chart({
    label: `Bars: how far ${name} moves with each number, the strongest on top. The slopes are in the table that follows.`,
    caption: `Change of ${name}${ranked.length > shown.length ? `; the ${shown.length} strongest of ${ranked.length}` : ""}. Filled: it rises with the number; pale: it falls.`,
    height: 84 + 58 * shown.length,
    data: [{
      type: "bar", orientation: "h", x: shown.map(({ effect }) => effect),
      y: shown.map(({ number, words }) => `${inLines(number)}<br>${pretty(words)} more`),
      marker: { color: shown.map(({ effect }) => (effect >= 0 ? COLOURS.main : COLOURS.tint)), line: { color: COLOURS.main, width: 1 } },
      hovertemplate: `%{x:.5~g} ${pretty(unit)}<extra></extra>`,
    }],
    layout: { xaxis: axis(headed("change", unit), { zeroline: true, zerolinecolor: COLOURS.limit }), yaxis: axis("", { ticks: "", showline: false, tickfont: { size: 12 } }), bargap: 0.4 },
  });
}
