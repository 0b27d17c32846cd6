/**
 * A sketch of the body with its faces named, in oblique projection. A body lies along z, which runs to the right, with
 * y up and x away from the reader; a stack stands on its first layer, with z up, x to the right and y away.
 */

import { endsOf, facesOf, layerName } from "./body_draft.js";
import { draw } from "./elements.js";
import { lengthIn } from "./lengths.js";
import { CONDITIONS, placesOf } from "./words.js";

const WIDTH = 440;
const HEIGHT = 280;
const DEPTH = { across: -0.52, up: 0.4 };

/** The axes away from the reader, upwards and to the right: a right-handed set. In this file's triples they stand in this order. */
const drawnAxes = (draft) => (draft.isStack ? ["y", "z", "x"] : ["x", "y", "z"]);

/** A typed length that can be drawn, or null. */
function drawable(typed, unit) {
  const length = lengthIn(typed, unit);
  return length > 0 ? length : null;
}

/** Thickness of each layer, null where one cannot be drawn. */
const thicknesses = (draft) => draft.layers.map((layer) => drawable(layer.thickness, draft.units.length));

function lengthOf(draft, axis) {
  if (endsOf(draft, axis) !== "finite") return null;
  if (axis !== "z" || !draft.isStack) return drawable(draft.size[axis], draft.units.length);
  const all = thicknesses(draft);
  return all.includes(null) ? null : all.reduce((sum, thickness) => sum + thickness, 0);
}

/** Lengths to draw, in no unit, and whether they keep the proportions. An axis without an end is drawn long. */
function proportions(draft) {
  const axes = drawnAxes(draft);
  const typed = axes.map((axis) => lengthOf(draft, axis));
  const isKnown = axes.every((axis, index) => typed[index] !== null || endsOf(draft, axis) !== "finite");
  const known = typed.filter((length) => length !== null);
  if (!isKnown || !known.length) return { sides: [1, 1, 1.6], isTrue: false };
  const longest = Math.max(...known);
  const [away, up, right] = typed;
  const across = Math.max(away ?? 0, up ?? 0) || longest;
  const all = [away ?? 1.2 * longest, up ?? 1.2 * longest, right ?? 2.2 * across];
  const most = Math.max(...all);
  // A stack is drawn thick enough for its layers to be seen.
  const least = [0.22, draft.isStack ? 0.45 : 0.22, 0.22];
  const sides = all.map((length, axis) => Math.max(length / most, least[axis]));
  return { sides, isTrue: all.every((length, axis) => length / most >= least[axis]) };
}

/** Where layers meet, in parts of the height; each is drawn thick enough to be seen. */
function interfaces(draft) {
  if (!draft.isStack || draft.layers.length < 2) return [];
  const all = thicknesses(draft);
  const most = Math.max(...all.map((thickness) => thickness ?? 1));
  const drawn = all.map((thickness) => Math.max((thickness ?? most) / most, 0.3));
  const height = drawn.reduce((sum, thickness) => sum + thickness, 0);
  let sum = 0;
  return drawn.slice(0, -1).map((thickness) => (sum += thickness / height));
}

/** Screen coordinates of a place given by fractions of the sides. */
function projection([away, up, right]) {
  const spanAcross = right + away * -DEPTH.across;
  const spanUp = up + away * DEPTH.up;
  const scale = Math.min((WIDTH - 170) / spanAcross, (HEIGHT - 110) / spanUp);
  const left = (WIDTH - spanAcross * scale) / 2 + away * -DEPTH.across * scale;
  const bottom = (HEIGHT + spanUp * scale) / 2 - 2;
  return (a, u, r) => [
    left + scale * (r * right + a * away * DEPTH.across),
    bottom - scale * (u * up + a * away * DEPTH.up),
  ];
}

const CORNERS = {
  front: [[0, 0, 0], [0, 1, 0], [0, 1, 1], [0, 0, 1]],
  back: [[1, 0, 0], [1, 1, 0], [1, 1, 1], [1, 0, 1]],
  bottom: [[0, 0, 0], [1, 0, 0], [1, 0, 1], [0, 0, 1]],
  top: [[0, 1, 0], [1, 1, 0], [1, 1, 1], [0, 1, 1]],
  left: [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]],
  right: [[0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]],
};
/** Which of these a face is drawn as. */
const sideOf = (face, draft) => placesOf(draft.isStack)[face].split(" ")[0];
const SHORT = { held: "held", flux: "inflow", film: "film", insulated: "insulated", mixed: "several" };
const VISIBLE = ["front", "top", "left"];

const points = (place, corners) => corners.map((corner) => place(...corner).map((v) => v.toFixed(1)).join(",")).join(" ");

/** Where the label of each face stands and the place on the face that its leader points at. */
function labels(place) {
  const [, top] = place(1, 1, 0.5);
  const [rightEdge] = place(0, 0.5, 1);
  const [leftEdge] = place(1, 0.5, 0);
  const [, bottom] = place(0, 0, 0.5);
  const [front] = place(0, 0.5, 0.42);
  return {
    front: { at: [front, bottom + 26], to: place(0, 0.3, 0.42), anchor: "middle" },
    back: { at: [place(1, 1, 0.8)[0] + 18, top - 14], to: place(1, 0.7, 0.72), anchor: "start" },
    // Side by side even under a short body.
    bottom: { at: [Math.max(place(0, 0, 0.82)[0], front + 66), bottom + 26], to: place(0.45, 0, 0.8), anchor: "middle" },
    top: { at: [place(1, 1, 0.22)[0], top - 14], to: place(0.5, 1, 0.3), anchor: "middle" },
    left: { at: [leftEdge - 14, place(0.5, 0.62, 0)[1]], to: place(0.5, 0.55, 0), anchor: "end" },
    right: { at: [rightEdge + 16, place(0.3, 0.5, 1)[1]], to: place(0.45, 0.5, 1), anchor: "start" },
  };
}

/**
 * Draw the sketch into an svg element.
 * @param {SVGElement} svg @param {any} draft @param {string|null} current the face to point out
 */
export function drawSketch(svg, draft, current) {
  const { sides, isTrue } = proportions(draft);
  const place = projection(sides);
  const faces = facesOf(draft);
  const parts = [];
  const cut = openEnds(draft);
  for (const [from, to] of cutEdges(cut)) parts.push(line(place(...from), place(...to), "edge onward"));
  for (const [from, to] of edgesOf(cut, false)) parts.push(line(place(...from), place(...to), "edge unseen-edge"));
  const currentSide = current && faces.includes(current) ? sideOf(current, draft) : null;
  if (currentSide && !VISIBLE.includes(currentSide)) {
    parts.push(draw("polygon", { class: "side current", points: points(place, CORNERS[currentSide]) }));
  }
  for (const side of VISIBLE) {
    const isCurrent = side === currentSide ? " current" : "";
    parts.push(draw("polygon", { class: `side ${side}${isCurrent}`, points: points(place, CORNERS[side]) }));
  }
  for (const [from, to] of edgesOf(cut, true)) parts.push(line(place(...from), place(...to), "edge"));
  for (const height of interfaces(draft)) parts.push(...interfaceLine(place, height));
  for (const end of cut) parts.push(...onwards(place, end));
  if (cut.some(([axis, end]) => axis === 2 && end === 1)) parts.push(brokenEnd(place));
  parts.push(...axes(place, drawnAxes(draft)));
  for (const face of faces) parts.push(...label(face, labels(place)[sideOf(face, draft)], draft, face === current));
  svg.setAttribute("viewBox", `0 0 ${WIDTH} ${HEIGHT}`);
  svg.setAttribute("aria-label", described(draft, faces));
  svg.replaceChildren(...parts);
  return isTrue;
}

const line = ([x1, y1], [x2, y2], name) =>
  draw("line", { class: name, x1: x1.toFixed(1), y1: y1.toFixed(1), x2: x2.toFixed(1), y2: y2.toFixed(1) });

/** Ends that the body does not have: the axis and the side, 0 or 1. @returns {[number, number][]} */
const openEnds = (draft) => drawnAxes(draft).flatMap((axis, index) => {
  const ends = endsOf(draft, axis);
  return [...(ends === "infinite" ? [[index, 0]] : []), ...(ends === "finite" ? [] : [[index, 1]])];
});

const CORNERS_OF_BODY = [0, 1].flatMap((away) => [0, 1].flatMap((up) => [0, 1].map((right) => [away, up, right])));
const EDGES = CORNERS_OF_BODY.flatMap((from) => [0, 1, 2]
  .filter((axis) => from[axis] === 0)
  .map((axis) => [from, from.map((value, index) => (index === axis ? 1 : value))]));
const isHidden = ([away, up, right]) => away === 1 && up === 0 && right === 1;
const isCut = (edge, cut) => cut.some(([axis, side]) => edge.every((corner) => corner[axis] === side));

/** Edges in sight or out of it: those that meet in the far lower corner are hidden. Open ends have none. */
const edgesOf = (cut, areSeen) => EDGES.filter((edge) => !isCut(edge, cut) && edge.some(isHidden) !== areSeen);

/** Where the drawing stops though the body does not; the end at the right is broken off by itself. */
const cutEdges = (cut) => EDGES.filter((edge) => isCut(edge, cut.filter(([axis]) => axis !== 2)) && !edge.some(isHidden));

/** At an open end the edges in sight go on dotted. */
function onwards(place, [axis, side]) {
  const across = [0, 1, 2].filter((other) => other !== axis);
  const corners = [0, 1].flatMap((first) => [0, 1].map((second) => {
    const corner = [0, 0, 0];
    corner[axis] = side;
    corner[across[0]] = first;
    corner[across[1]] = second;
    return corner;
  }));
  return corners.filter((corner) => !isHidden(corner)).map((corner) => {
    const beyond = corner.map((value, index) => (index === axis ? value + (side ? 0.14 : -0.14) : value));
    return line(place(...corner), place(...beyond), "edge onward");
  });
}

/** A body without an end at the right is broken off there in a zigzag. */
function brokenEnd(place) {
  const outline = [[0, 0], [0, 0.2], [0, 0.4], [0, 0.6], [0, 0.8], [0, 1], [0.33, 1], [0.67, 1], [1, 1]];
  const zigzag = outline.map(([away, up], index) => place(away, up, 1 + [0, 0.025, -0.025][index === 0 || index > 7 ? 0 : 1 + (index % 2)]));
  return draw("polyline", { class: "break", points: zigzag.map((at) => at.map((v) => v.toFixed(1)).join(",")).join(" ") });
}

/** Where two layers meet, on the front and on the left. */
const interfaceLine = (place, height) => [
  line(place(0, height, 0), place(0, height, 1), "edge interface"),
  line(place(0, height, 0), place(1, height, 0), "edge interface"),
];

function axes(place, names) {
  const [x0, y0] = place(0, 0, 0);
  const towards = [place(0.42, 0, 0), place(0, 0.42, 0), place(0, 0, 0.22)];
  return towards.flatMap(([x, y], way) => {
    const length = Math.hypot(x - x0, y - y0);
    const [ux, uy] = [(x - x0) / length, (y - y0) / length];
    const [tx, ty] = [x0 + ux * 34, y0 + uy * 34];
    const head = [[tx, ty], [tx - 7 * ux - 3 * uy, ty - 7 * uy + 3 * ux], [tx - 7 * ux + 3 * uy, ty - 7 * uy - 3 * ux]];
    const beside = way === 1 ? [tx + 9, ty + 6] : [tx + ux * 3, ty + (way === 2 ? -7 : -6)];
    return [
      line([x0, y0], [tx, ty], "axis"),
      draw("polygon", { class: "axis-head", points: head.map((at) => at.map((v) => v.toFixed(1)).join(",")).join(" ") }),
      draw("text", { class: "axis-name", x: beside[0], y: beside[1], "text-anchor": "middle" }, names[way]),
    ];
  });
}

function label(face, { at: [x, y], to, anchor }, draft, isCurrent) {
  const isSeen = VISIBLE.includes(sideOf(face, draft));
  const start = { middle: [x, y < to[1] ? y + 6 : y - 22], start: [x - 4, y - 2], end: [x + 4, y - 2] }[anchor];
  const condition = SHORT[draft.faces[face].condition];
  return [
    line(start, to, isSeen ? "leader" : "leader behind"),
    draw("circle", { class: isSeen ? "spot" : "spot behind", cx: to[0].toFixed(1), cy: to[1].toFixed(1), r: 3 }),
    draw(
      "text",
      { class: `face-label${isCurrent ? " current" : ""}`, x: x.toFixed(1), y: y.toFixed(1), "text-anchor": anchor },
      draw("tspan", { class: "face-label-name", x: x.toFixed(1), dy: y < to[1] && anchor !== "end" ? -10 : -2 }, face),
      draw("tspan", { class: "face-label-condition", x: x.toFixed(1), dy: 13 }, condition),
    ),
  ];
}

function described(draft, faces) {
  const places = placesOf(draft.isStack);
  const each = faces.map((face) => `${face} (${places[face]}): ${CONDITIONS[draft.faces[face].condition]}`);
  const [away, up, right] = drawnAxes(draft);
  const open = Object.entries({ [away]: "to the back", [up]: "upwards", [right]: "to the right" })
    .filter(([axis]) => endsOf(draft, axis) !== "finite")
    .map(([axis, way]) => ` The body goes on ${way}${endsOf(draft, axis) === "infinite" ? " and the other way" : ""} without end.`);
  const layers = draft.isStack ? ` Layers from below: ${draft.layers.map(layerName).join(", ")}.` : "";
  return `Sketch of the body: ${right} runs to the right, ${up} up, ${away} to the back. ${each.join("; ")}.${open.join("")}${layers}`;
}
