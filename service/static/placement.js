/** Rectangles of a face before and after they were moved. */

import { draw, make } from "./elements.js";
import { brief, pretty } from "./numbers.js";
import { axesAcross, axisOf } from "./words.js";

const WIDTH = 560;

/**
 * The face whose patches or pads the numbers move, or null where they move none, or several faces'.
 * @param {any} asked a request @param {{value: number}[]} numbers with their new values
 */
export function placement({ problem, numbers: references }, numbers, units) {
  const places = references.flatMap(({ at, shift }, index) => [at ?? shift ?? []].flat().flatMap((pointer) => {
    const [, face, list, which, axis, end] = /^\/problem\/faces\/(\w+)\/(\w+\/patches|pads)\/(\d+)\/([xyz])\/([01])$/.exec(pointer) ?? [];
    return face ? [{ face, list, which: Number(which), axis, end: Number(end), isShift: shift !== undefined, value: numbers[index].value }] : [];
  }));
  const [first] = places;
  if (!first || places.some(({ face, list }) => face !== first.face || list !== first.list)) return null;
  const across = axesAcross(axisOf(first.face));
  const size = across.map((axis) => problem.body.size[axis]);
  const before = first.list.split("/").reduce((here, key) => here[key], problem.faces[first.face]);
  // Only bare numbers can be drawn without the service's units.
  if (![...size, ...before.flatMap((one) => across.flatMap((axis) => one[axis]))].every((length) => typeof length === "number")) return null;
  const after = structuredClone(before);
  for (const { which, axis, end, isShift, value } of places) after[which][axis][end] = isShift ? before[which][axis][end] + value : value;
  return picture(first.face, across, size, before, after, units);
}

function picture(face, [right, up], [wide, high], before, after, units) {
  const scale = Math.min((WIDTH - 80) / wide, 340 / high);
  const [left, top] = [(WIDTH - scale * wide) / 2, 12];
  const box = (one) => ({
    x: (left + scale * one[right][0]).toFixed(1), y: (top + scale * (high - one[up][1])).toFixed(1),
    width: Math.max(scale * (one[right][1] - one[right][0]), 1).toFixed(1), height: Math.max(scale * (one[up][1] - one[up][0]), 1).toFixed(1),
  });
  const name = (one, index) => {
    const at = box(one);
    return draw("text", { class: "place-name", x: (Number(at.x) + at.width / 2).toFixed(1), y: (Number(at.y) + at.height / 2 + 4).toFixed(1), "text-anchor": "middle" }, one.name ?? String(index + 1));
  };
  const bottom = top + scale * high;
  return make("figure", { class: "network" },
    draw(
      "svg", { viewBox: `0 0 ${WIDTH} ${(bottom + 30).toFixed(0)}`, role: "img", "aria-label": `Face ${face.replace("_", " ")} with its patches before and after; the shifts are in the table above.` },
      draw("rect", { class: "pad", x: left.toFixed(1), y: top, width: (scale * wide).toFixed(1), height: (scale * high).toFixed(1) }),
      before.map((one) => draw("rect", { class: "place-before", ...box(one) })), after.map((one) => draw("rect", { class: "place-after", ...box(one) })), after.map(name),
      draw("text", { class: "plot-text", x: left.toFixed(1), y: (bottom + 20).toFixed(1) }, `${right} to ${brief(wide)} ${pretty(units.length)}`),
      draw("text", { class: "plot-text", x: (left - 8).toFixed(1), y: top + 12, "text-anchor": "end" }, up),
    ),
    make("figcaption", {}, `Face ${face.replace("_", " ")}: dashed as it stands, filled with the best values.`));
}
