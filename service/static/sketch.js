/**
 * A sketch of the body with its faces named, in oblique projection: z to the right, y up, x away from the
 * reader (a right-handed set), so that x_low is in front, z_low at the left end and y_high on top.
 */

import { facesOf } from "./draft.js";
import { draw } from "./elements.js";
import { CONDITIONS, METRES, PLACES } from "./words.js";

const WIDTH = 440;
const HEIGHT = 280;
const DEPTH = { across: -0.52, up: 0.4 };

/** Typed length in metres, or nothing that can be drawn. */
function metres(typed, unit) {
  const [, number, own] = /^\s*([\d.eE+-]+)\s*(\S*)\s*$/.exec(typed) ?? [];
  const length = Number(number) * (METRES[own || unit] ?? NaN);
  return length > 0 && Number.isFinite(length) ? length : null;
}

/** Lengths to draw, in no unit, and whether they keep the proportions. */
function proportions(draft) {
  const typed = ["x", "y", "z"].map((axis) =>
    axis === "z" && draft.isBar ? null : metres(draft.size[axis], draft.units.length),
  );
  const known = typed.filter((length) => length !== null);
  if (known.length < (draft.isBar ? 2 : 3)) return { sides: [1, 1, 1.6], isTrue: false };
  const longest = Math.max(...known);
  const cross = Math.max(typed[0], typed[1]);
  const all = [typed[0], typed[1], typed[2] ?? 2.2 * cross];
  const most = Math.max(...all);
  const sides = all.map((length) => Math.max(length / most, 0.22));
  return { sides, isTrue: all.every((length) => length / most >= 0.22) && longest > 0 };
}

/** Screen coordinates of a place given by fractions of the sides. */
function projection([x, y, z]) {
  const spanAcross = z + x * -DEPTH.across;
  const spanUp = y + x * DEPTH.up;
  const scale = Math.min((WIDTH - 170) / spanAcross, (HEIGHT - 110) / spanUp);
  const left = (WIDTH - spanAcross * scale) / 2 + x * -DEPTH.across * scale;
  const bottom = (HEIGHT + spanUp * scale) / 2 - 2;
  return (fx, fy, fz) => [
    left + scale * (fz * z + fx * x * DEPTH.across),
    bottom - scale * (fy * y + fx * x * DEPTH.up),
  ];
}

const CORNERS = {
  x_low: [[0, 0, 0], [0, 1, 0], [0, 1, 1], [0, 0, 1]],
  x_high: [[1, 0, 0], [1, 1, 0], [1, 1, 1], [1, 0, 1]],
  y_low: [[0, 0, 0], [1, 0, 0], [1, 0, 1], [0, 0, 1]],
  y_high: [[0, 1, 0], [1, 1, 0], [1, 1, 1], [0, 1, 1]],
  z_low: [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]],
  z_high: [[0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]],
};
const SHORT = { held: "held", flux: "inflow", film: "film", insulated: "insulated" };
const VISIBLE = ["x_low", "y_high", "z_low"];

const points = (place, corners) => corners.map((corner) => place(...corner).map((v) => v.toFixed(1)).join(",")).join(" ");

/** Where the label of each face stands and the place on the face that its leader points at. */
function labels(place) {
  const [, top] = place(1, 1, 0.5);
  const [rightEdge] = place(0, 0.5, 1);
  const [leftEdge] = place(1, 0.5, 0);
  const [, bottom] = place(0, 0, 0.5);
  return {
    x_low: { at: [place(0, 0.5, 0.42)[0], bottom + 26], to: place(0, 0.3, 0.42), anchor: "middle" },
    x_high: { at: [place(1, 1, 0.8)[0] + 18, top - 14], to: place(1, 0.7, 0.72), anchor: "start" },
    y_low: { at: [place(0, 0, 0.82)[0], bottom + 26], to: place(0.45, 0, 0.8), anchor: "middle" },
    y_high: { at: [place(1, 1, 0.22)[0], top - 14], to: place(0.5, 1, 0.3), anchor: "middle" },
    z_low: { at: [leftEdge - 14, place(0.5, 0.62, 0)[1]], to: place(0.5, 0.55, 0), anchor: "end" },
    z_high: { at: [rightEdge + 16, place(0.3, 0.5, 1)[1]], to: place(0.45, 0.5, 1), anchor: "start" },
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
  for (const [from, to] of edgesOf(draft.isBar, false)) parts.push(line(place(...from), place(...to), "edge unseen-edge"));
  if (current && faces.includes(current) && !VISIBLE.includes(current)) {
    parts.push(draw("polygon", { class: "side current", points: points(place, CORNERS[current]) }));
  }
  for (const face of VISIBLE) {
    const isCurrent = face === current ? " current" : "";
    parts.push(draw("polygon", { class: `side ${face}${isCurrent}`, points: points(place, CORNERS[face]) }));
  }
  for (const [from, to] of edgesOf(draft.isBar, true)) parts.push(line(place(...from), place(...to), "edge"));
  if (draft.isBar) parts.push(...openEnd(place));
  parts.push(...axes(place));
  for (const face of faces) parts.push(...label(face, labels(place)[face], draft, face === current));
  svg.setAttribute("viewBox", `0 0 ${WIDTH} ${HEIGHT}`);
  svg.setAttribute("aria-label", described(draft, faces));
  svg.replaceChildren(...parts);
  return isTrue;
}

const line = ([x1, y1], [x2, y2], name) =>
  draw("line", { class: name, x1: x1.toFixed(1), y1: y1.toFixed(1), x2: x2.toFixed(1), y2: y2.toFixed(1) });

/** Edges in sight or out of it: those that meet in the far lower corner are hidden. A bar has none at its end. */
function edgesOf(isBar, areSeen) {
  const corners = [0, 1].flatMap((x) => [0, 1].flatMap((y) => [0, 1].map((z) => [x, y, z])));
  const edges = corners.flatMap((from) => [0, 1, 2]
    .filter((axis) => from[axis] === 0)
    .map((axis) => [from, from.map((value, index) => (index === axis ? 1 : value))]));
  const isHidden = ([x, y, z]) => x === 1 && y === 0 && z === 1;
  return edges
    .filter((edge) => !(isBar && edge.every((corner) => corner[2] === 1)))
    .filter((edge) => edge.some(isHidden) !== areSeen);
}

/** A bar is broken off in a zigzag, and its long edges go on dotted. */
function openEnd(place) {
  const outline = [[0, 0], [0, 0.2], [0, 0.4], [0, 0.6], [0, 0.8], [0, 1], [0.33, 1], [0.67, 1], [1, 1]];
  const zigzag = outline.map(([x, y], index) => place(x, y, 1 + [0, 0.025, -0.025][index === 0 || index > 7 ? 0 : 1 + (index % 2)]));
  const onward = [[0, 0], [0, 1], [1, 1]].map(([x, y]) => line(place(x, y, 1.02), place(x, y, 1.14), "edge onward"));
  return [draw("polyline", { class: "break", points: zigzag.map((at) => at.map((v) => v.toFixed(1)).join(",")).join(" ") }), ...onward];
}

function axes(place) {
  const [x0, y0] = place(0, 0, 0);
  const names = { x: place(0.42, 0, 0), y: place(0, 0.42, 0), z: place(0, 0, 0.22) };
  return Object.entries(names).flatMap(([axis, [x, y]]) => {
    const length = Math.hypot(x - x0, y - y0);
    const [ux, uy] = [(x - x0) / length, (y - y0) / length];
    const [tx, ty] = [x0 + ux * 34, y0 + uy * 34];
    const head = [[tx, ty], [tx - 7 * ux - 3 * uy, ty - 7 * uy + 3 * ux], [tx - 7 * ux + 3 * uy, ty - 7 * uy - 3 * ux]];
    const beside = axis === "y" ? [tx + 9, ty + 6] : [tx + ux * 3, ty + (axis === "z" ? -7 : -6)];
    return [
      line([x0, y0], [tx, ty], "axis"),
      draw("polygon", { class: "axis-head", points: head.map((at) => at.map((v) => v.toFixed(1)).join(",")).join(" ") }),
      draw("text", { class: "axis-name", x: beside[0], y: beside[1], "text-anchor": "middle" }, axis),
    ];
  });
}

function label(face, { at: [x, y], to, anchor }, draft, isCurrent) {
  const isSeen = VISIBLE.includes(face);
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
  const each = faces.map((face) => `${face} (${PLACES[face]}): ${CONDITIONS[draft.faces[face].condition]}`);
  const end = draft.isBar ? " The bar goes on to the right without end." : "";
  return `Sketch of the body: z runs to the right, y up, x to the back. ${each.join("; ")}.${end}`;
}
