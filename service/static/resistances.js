/** Resistances between pads: the matrix as a tinted table, and the network drawn over the pads. */

import { draw, make, scrolled, verdict } from "./elements.js";
import { bounded, brief, pretty, shown } from "./numbers.js";
import { padName } from "./pads.js";

/** A larger matrix is shown in its colours alone, and this one with every digit that is certain. */
const MOST_WRITTEN = 12;
const MOST_EXACT = 5;
/** So many resistors are drawn, the strongest. */
const MOST_DRAWN = 120;
/** So many pads have the values of their resistors written. */
const MOST_VALUES = 4;

/** @param {any} answer of POST /v1/resistances */
export function resistancesView(answer, words) {
  const meaning = answer.mean
    ? "By how much the mean of each pad rises for each unit of flow into one of them: a row for the pad that rises, a column for the pad that is fed."
    : "How far two pads are apart for each unit of flow from one to the other, the others passing none. Nothing but the pads takes up a flow here.";
  return [
    make("p", { class: "hint" }, meaning),
    matrixView(answer, words),
    certaintyView(answer),
    make("h3", {}, "Equivalent resistors"),
    ...networkView(answer),
  ];
}

/** Tint of a value between the least and the greatest, on the colours of the potential. */
function tintOf(scale, part) {
  const at = Math.min(Math.max(part, 0), 1) * (scale.length - 1);
  const index = Math.min(Math.floor(at), scale.length - 2);
  const channels = (colour) => [1, 3, 5].map((start) => parseInt(colour.slice(start, start + 2), 16));
  const [low, high] = [channels(scale[index]), channels(scale[index + 1])];
  return `rgb(${low.map((value, channel) => Math.round(value + (high[channel] - value) * (at - index))).join(",")})`;
}

function matrixView({ pads, mean, pairs, units }, { scale }) {
  const matrix = mean ?? pairs;
  const all = matrix.value.flat().filter((value) => value > 0);
  // By the logarithm: neighbours are seen as well as the pad itself.
  const least = Math.log(Math.max(Math.min(...all), 1e-6 * Math.max(...all)));
  const span = Math.log(Math.max(...all)) - least || 1;
  const tint = (value) => tintOf(scale, (Math.log(Math.max(value, Math.exp(least))) - least) / span);
  const isWritten = pads.length <= MOST_WRITTEN;
  // In colours alone the whole matrix fits on the page, and every fifth or tenth pad has its number.
  const every = pads.length > 50 ? 10 : 5;
  const number = (index) => (index === 0 || (index + 1) % every === 0 ? String(index + 1) : "");
  const height = isWritten ? null : `height:${Math.max(3, Math.min(16, Math.round(640 / pads.length)))}px`;
  const head = (index, scope) => make("th", { scope, title: padName(pads[index]) }, isWritten ? padName(pads[index]) : make("span", {}, number(index)));
  const words = (value, row, column) => {
    if (pads.length <= MOST_EXACT) return shown(value, matrix.error_bound[row][column]);
    return isWritten ? brief(Number(value.toPrecision(4))) : null;
  };
  const entry = (value, row, column) => {
    const said = `${padName(pads[row])} for ${padName(pads[column])}: ${shown(value, matrix.error_bound[row][column])} ${units.resistance}`;
    return make("td", { style: `background:${tint(value)}`, title: said }, words(value, row, column));
  };
  const table = make(
    "table", { class: isWritten ? "numbers matrix" : "numbers matrix small-cells" },
    make("caption", {}, `${mean ? "Mean rise per unit flow" : "Resistance between pads"}, ${pretty(units.resistance)}`),
    make("thead", {}, make("tr", {}, make("th", { scope: "col" }, mean && isWritten ? "rises \\ fed" : "Pad"),
      pads.map((_, index) => head(index, "col")))),
    make("tbody", {}, matrix.value.map((line, row) => make("tr", { style: height },
      head(row, "row"), line.map((value, column) => entry(value, row, column))))),
  );
  return scrolled(table, "Matrix of rises per unit flow");
}

function certaintyView({ certificate: c, mean, pairs, units }) {
  const unit = pretty(units.resistance);
  const within = `No entry is further off than ${bounded(Math.max(...(mean ?? pairs).error_bound.flat()))} ${unit}.`;
  if (c.agreement === null) return verdict("good", "Bounded by refinement", within);
  const agree = c.agreement <= c.agreement_bound;
  return verdict(
    agree ? "good" : "bad",
    agree ? "Symmetric, and within its bound" : "The check failed",
    `${within} ${c.checked_entries} entries were computed once more, from pad to pad and back; `
      + `they differ by at most ${bounded(c.agreement)} ${unit}${agree ? "" : ". Do not rely on these numbers"}.`,
  );
}

function networkView({ pads, network, units }) {
  if (!network) return [make("p", {}, "The pads are too much alike for a network at this accuracy; ask for more accuracy, or join pads.")];
  const unit = pretty(units.resistance);
  const parts = [networkPicture(pads, network, unit)];
  const count = network.negative;
  if (count) {
    parts.push(make("p", { class: "hint" }, `${count === 1 ? "One resistor is" : `${count} resistors are`} negative, drawn dashed: part of an exact equivalent all the same.`));
  }
  if (pads.length <= MOST_WRITTEN) parts.push(resistorTable(pads, network, units));
  return parts;
}

/** All resistors, the pairs first. */
function resistorsOf(network) {
  const pairs = network.between.flatMap((row, i) => row.slice(i + 1).map((conductance, offset) => {
    const j = i + 1 + offset;
    return { i, j, conductance, bound: network.between_error_bound[i][j] };
  }));
  const grounds = network.to_environment.map((conductance, i) => ({ i, j: null, conductance, bound: network.to_environment_error_bound[i] }));
  // What is zero within its bound joins nothing.
  return [...pairs, ...grounds].filter(({ conductance, bound }) => Math.abs(conductance) > bound);
}

/** Resistance with its bound, from a conductance with one. */
function resistance({ conductance, bound }) {
  return { value: 1 / conductance, bound: bound / (Math.abs(conductance) * (Math.abs(conductance) - bound)) };
}

function resistorTable(pads, network, units) {
  const rows = resistorsOf(network).map((resistor) => {
    const found = resistance(resistor);
    const to = resistor.j === null ? "environment" : padName(pads[resistor.j]);
    return make("tr", {}, make("th", { scope: "row" }, `${padName(pads[resistor.i])} \u2013 ${to}`),
      make("td", {}, shown(found.value, found.bound), make("span", { class: "known" }, found.bound > 0 ? `\u00b1 ${bounded(found.bound)}` : "exact")));
  });
  return scrolled(
    make("table", { class: "numbers" },
      make("caption", {}, "The environment is every held value and ambient together, as zero"),
      make("thead", {}, make("tr", {}, make("th", { scope: "col" }, "Between"), make("th", { scope: "col" }, `Resistance, ${pretty(units.resistance)}`))),
      make("tbody", {}, rows)),
    "Resistors",
  );
}

const WIDTH = 560;

/** The pads where they lie on their face, or in a ring where they are on several, joined by lines as thick as they conduct. */
function networkPicture(pads, network, unit) {
  const { places, height } = placesOf(pads);
  const resistors = resistorsOf(network);
  const most = Math.max(...resistors.map(({ conductance }) => Math.abs(conductance)));
  const width = ({ conductance }) => (0.6 + 6 * Math.sqrt(Math.abs(conductance) / most)).toFixed(2);
  const pairs = resistors.filter(({ j }) => j !== null)
    .sort((a, b) => Math.abs(b.conductance) - Math.abs(a.conductance)).slice(0, MOST_DRAWN).reverse();
  const hasValues = pads.length <= MOST_VALUES;
  const value = (resistor, x, y) => {
    const words = brief(Number(resistance(resistor).value.toPrecision(3)));
    return hasValues ? [draw("text", { class: "resistor-value", x: x.toFixed(1), y: y.toFixed(1), "text-anchor": "middle" }, words)] : [];
  };
  const name = ({ conductance }) => (conductance < 0 ? "resistor negative" : "resistor");
  const joins = pairs.flatMap((pair) => {
    const [from, to] = [places[pair.i], places[pair.j]];
    return [
      draw("line", { class: name(pair), x1: from.x, y1: from.y, x2: to.x, y2: to.y, "stroke-width": width(pair) }),
      ...value(pair, (from.x + to.x) / 2, (from.y + to.y) / 2 - 4),
    ];
  });
  const grounds = resistors.filter(({ j }) => j === null).flatMap((ground) => {
    const { x, y, down } = places[ground.i];
    const foot = y + down;
    return [
      draw("line", { class: name(ground), x1: x, y1: y, x2: x, y2: foot, "stroke-width": width(ground) }),
      ...[9, 6, 3].map((half, step) => draw("line", { class: "ground", x1: x - half, x2: x + half, y1: foot + 4 * step, y2: foot + 4 * step })),
      ...value(ground, x + 24, foot - 4),
    ];
  });
  const spots = places.flatMap(({ x, y, box }, index) => [
    box ? draw("rect", { class: "pad", ...box }) : null,
    draw("circle", { class: "node", cx: x, cy: y, r: 4 }),
    pads.length <= MOST_WRITTEN ? draw("text", { class: "node-name", x, y: y - (box ? box.height / 2 + 5 : 9), "text-anchor": "middle" }, padName(pads[index])) : null,
  ].filter(Boolean));
  return make("figure", { class: "network" },
    draw("svg", {
      viewBox: `0 0 ${WIDTH} ${height}`, role: "img",
      "aria-label": `Network of ${pads.length} pads and ${resistors.length} resistors; thicker lines conduct better. The values are in the table or the saved list.`,
    }, ...spots.filter((spot) => spot.tagName === "rect"), ...joins, ...grounds, ...spots.filter((spot) => spot.tagName !== "rect")),
    make("figcaption", {}, `Thicker lines conduct better; short ones end in the environment.${hasValues ? ` Values in ${unit}.` : ""}`
      + `${pairs.length < pads.length * (pads.length - 1) / 2 ? ` The ${MOST_DRAWN} strongest between pads are drawn.` : ""}`));
}

/** Where each pad is drawn, and the height of the picture. */
function placesOf(pads) {
  const isOneFace = pads.every(({ face, rectangle }) => face === pads[0].face && rectangle);
  if (!isOneFace) {
    const middle = 170;
    const places = pads.map((_, index) => {
      const angle = (2 * Math.PI * index) / pads.length - Math.PI / 2;
      return { x: WIDTH / 2 + 190 * Math.cos(angle), y: middle + 110 * Math.sin(angle), down: 34 };
    });
    return { places, height: 350 };
  }
  const [across, up] = Object.keys(pads[0].rectangle);
  const ends = (axis, end) => pads.map(({ rectangle }) => rectangle[axis][end]);
  const left = Math.min(...ends(across, 0));
  const right = Math.max(...ends(across, 1));
  const bottom = Math.min(...ends(up, 0));
  const top = Math.max(...ends(up, 1));
  const scale = Math.min((WIDTH - 120) / (right - left), 320 / (top - bottom));
  const margin = (WIDTH - scale * (right - left)) / 2;
  const places = pads.map(({ rectangle }) => {
    const [x0, x1] = rectangle[across].map((at) => margin + scale * (at - left));
    const [y1, y0] = rectangle[up].map((at) => 30 + scale * (top - at));
    return {
      x: (x0 + x1) / 2, y: (y0 + y1) / 2, down: (y1 - y0) / 2 + 22,
      box: { x: x0.toFixed(1), y: y0.toFixed(1), width: Math.max(x1 - x0, 1), height: Math.max(y1 - y0, 1) },
    };
  });
  return { places, height: 30 + scale * (top - bottom) + 50 };
}
