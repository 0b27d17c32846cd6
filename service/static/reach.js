/** How far a face reaches: distances at the worst place and on the axis, as a table and as a small picture. */

import { draw, make, scrolled } from "./elements.js";
import { bounded, brief, evenStep, greatest, placed, pretty, shown } from "./numbers.js";

/** @param {any} answer of POST /v1/reach @param {any} problem as it was sent */
export function reachView({ reach, units }, problem, words) {
  const scale = greatest(reach.worst.flatMap(({ at }) => at ?? []));
  return [
    make("p", { class: "hint" }, meaning(reach, units, problem, words)),
    picture(reach, units),
    table(reach, units, scale),
    make("dl", { class: "facts" }, make("div", {}, make("dt", {}, "Decay length"), make("dd", {}, decay(reach, units)))),
  ].filter(Boolean);
}

function meaning({ face, change, reference, largest }, units, problem, words) {
  const difference = pretty(units.potential_difference);
  const size = `${shown(largest.value, largest.error_bound)} ${difference}`;
  if (change === "uniform") {
    const datum = ["held", "film"].includes(problem.faces[face].condition) ? difference : pretty(units.flux);
    return `What a change of 1 ${datum} all over ${face} does, with all else as it is: at most ${size} on the face.`;
  }
  const from = reference === null ? "by its inflow" : `counted from ${brief(reference)} ${pretty(units.potential)}`;
  return `What ${face} alone does to the ${words.potential.toLowerCase()}, ${from}: at most ${size} on the face, and less the farther from it.`;
}

const percent = (fraction) => `${brief(100 * fraction)} %`;

function table({ face, worst, on_axis: onAxis }, units, scale) {
  const length = pretty(units.length);
  const across = ["x", "y", "z"].filter((axis) => axis !== face[0]);
  const place = ({ at }) => across.map((axis) => [axis, at["xyz".indexOf(axis)]]).filter(([, where]) => where !== null)
    .map(([axis, where]) => `${axis} ${placed(where, scale)}`).join(", ");
  const cell = (reached, hasPlace) => {
    if (!reached) return make("td", {}, "\u2013");
    const { distance, error_bound: bound, reason } = reached;
    if (distance === null) return make("td", { class: "no-value" }, "nowhere", make("span", { class: "known" }, reason));
    return make("td", {}, shown(distance, bound), make("span", { class: "known" }, bound > 0 ? `\u00b1 ${bounded(bound)}` : "exact"),
      hasPlace ? make("span", { class: "known" }, place(reached)) : null);
  };
  const heads = ["Left of it", `Less everywhere beyond, ${length}`, `Less in the middle beyond, ${length}`];
  return scrolled(
    make(
      "table", { class: "numbers reach" },
      make("caption", {}, `Distances from ${face}; everywhere with the worst place, in ${length}`),
      make("thead", {}, make("tr", {}, heads.map((head) => make("th", { scope: "col" }, head)))),
      make("tbody", {}, worst.map((reached, index) => make("tr", {},
        make("th", { scope: "row" }, percent(reached.fraction)), cell(reached, true), cell(onAxis[index], false)))),
    ),
    "Reach",
  );
}

function decay({ decay: { length, reason } }, units) {
  if (length === null) return reason;
  return `${brief(length)} ${pretty(units.length)}. Far from the face every such distance leaves 37 % (1/e) of what was there.`;
}

const [WIDTH, HEIGHT] = [560, 220];
const [LEFT, RIGHT, TOP, BOTTOM] = [66, 24, 16, 50];

/** What is left over distance, by its logarithm, along which a decay is a straight line. */
function picture({ face, worst, on_axis: onAxis }, units) {
  const reached = [...worst, ...onAxis].filter(({ distance }) => distance !== null);
  const farthest = greatest(reached.map(({ distance }) => distance));
  if (!farthest) return null;
  const fractions = [1, ...worst.map(({ fraction }) => fraction)];
  const deepest = Math.log(Math.min(...fractions));
  const x = (distance) => LEFT + ((WIDTH - LEFT - RIGHT) * distance) / (1.05 * farthest);
  const y = (fraction) => TOP + ((HEIGHT - TOP - BOTTOM) * Math.log(fraction)) / deepest;
  const text = (words, at, anchor) => draw("text", { class: "plot-text", x: at[0].toFixed(1), y: at[1].toFixed(1), "text-anchor": anchor }, words);
  const line = (from, to, name) => draw("line", {
    class: name, x1: from[0].toFixed(1), y1: from[1].toFixed(1), x2: to[0].toFixed(1), y2: to[1].toFixed(1),
  });
  const end = WIDTH - RIGHT;
  const step = evenStep(farthest, 6);
  const distances = Array.from({ length: Math.floor((1.05 * farthest) / step) + 1 }, (_, index) => index * step);
  const curve = (points, name) => {
    const places = [[x(0), y(1)], ...points.filter(({ distance }) => distance !== null).map((point) => [x(point.distance), y(point.fraction)])];
    return [
      draw("polyline", { class: `plot-line ${name}`, points: places.map((at) => at.map((v) => v.toFixed(1)).join(",")).join(" ") }),
      ...places.slice(1).map(([cx, cy]) => draw("circle", { class: `plot-spot ${name}`, cx: cx.toFixed(1), cy: cy.toFixed(1), r: 4 })),
    ];
  };
  return make("figure", { class: "network" },
    draw(
      "svg",
      { viewBox: `0 0 ${WIDTH} ${HEIGHT}`, role: "img", "aria-label": `What is left of ${face} over the distance from it; the numbers are in the table that follows.` },
      fractions.flatMap((fraction) => [line([LEFT, y(fraction)], [end, y(fraction)], "plot-grid"), text(percent(fraction), [LEFT - 7, y(fraction) + 4], "end")]),
      distances.flatMap((distance) => [
        line([x(distance), HEIGHT - BOTTOM], [x(distance), HEIGHT - BOTTOM + 5], "plot-axis"), text(brief(distance), [x(distance), HEIGHT - BOTTOM + 21], "middle"),
      ]),
      line([LEFT, HEIGHT - BOTTOM], [end, HEIGHT - BOTTOM], "plot-axis"),
      line([LEFT, TOP], [LEFT, HEIGHT - BOTTOM], "plot-face"),
      text(`distance from ${face}, ${pretty(units.length)}`, [(LEFT + end) / 2, HEIGHT - 6], "middle"),
      curve(onAxis, "on-axis"), curve(worst, "worst"),
    ),
    make("figcaption", {}, `Filled: at the worst place of each section${onAxis.length ? "; hollow: in the middle" : ""}. Lines only join what was computed.`));
}
