/** The places of the plane that is shown, as a request wants them. */

import { endsOf } from "./body_draft.js";
import { patchesOf } from "./faces_draft.js";
import { lengthIn } from "./lengths.js";
import { entry, idOf, quantity } from "./typed.js";
import { axesAcross, axisOf } from "./words.js";

/** More edges of patches than these are finer than the picture. */
const MOST_EDGES = 80;
/** How near beside an edge the next place is, in parts of the axis: less than a point of the picture. */
const BESIDE = 5e-4;

/** Whether the plane shows a section through the layers of a stack. */
export const isSection = (draft) => draft.isStack && draft.plane.axis !== "z";

/**
 * The plane as one grid, or as one for each layer, so that both sides of an interface are seen.
 * @param {any} plane its name and position @param {(pointer: string, id: string) => void} note
 */
export function gridsOf(draft, plane, note) {
  const { axis, count } = draft.plane;
  const across = axesAcross(axis).filter((other) => !(other === "z" && isSection(draft)));
  const grid = { ...plane };
  for (const other of across) grid[other] = placesAlong(draft, other);
  const grids = isSection(draft)
    ? draft.layers.map((_, layer) => ({ ...grid, name: `layer ${layer}`, z: { layer, count: Math.round(Number(count) / 4) } }))
    : [grid];
  grids.forEach((_, index) => {
    const here = `#/evaluate/grids/${index}`;
    note(here, "plane-position");
    for (const other of across) {
      const isFinite = endsOf(draft, other) === "finite";
      note(`${here}/${other}`, isFinite ? idOf("size", other) : idOf("plane-to", other));
      note(`${here}/${other}/from`, isFinite ? idOf("size", other) : idOf("plane-from", other));
    }
  });
  return grids;
}

/**
 * Even places along an axis of the plane, and among them the edges of all patches and pads with places just beside
 * them: there data jump and lines of equal value bend.
 */
function placesAlong(draft, axis) {
  const { from, to, count: typedCount } = draft.plane;
  const ends = endsOf(draft, axis);
  const begin = ends === "infinite" ? from[axis] : "0";
  const end = ends === "finite" ? draft.size[axis] : to[axis];
  const count = Number(typedCount);
  const even = { from: ends === "infinite" ? entry(begin) : 0, to: quantity(end), count };

  const { length: unit } = draft.units;
  const [first, last] = [lengthIn(begin, unit), lengthIn(end, unit)];
  if (first === null || last === null || !(first < last)) return even;
  const step = (last - first) / (count - 1);
  const beside = BESIDE * (last - first);
  const edges = edgesAlong(draft, axis).filter(({ at }) => at > first + 2 * beside && at < last - 2 * beside);
  if (!edges.length || edges.length > MOST_EDGES) return even;
  const isFree = (place) => edges.every(({ at }) => Math.abs(place - at) > 1.5 * beside);
  const between = Array.from({ length: count - 2 }, (_, index) => first + (index + 1) * step).filter(isFree);
  const places = [...between, ...edges.flatMap(({ at }) => [at - beside, at + beside])]
    .map((at) => ({ at, written: Number(at.toPrecision(12)) }));
  const sorted = [...places, ...edges].sort((a, b) => a.at - b.at).map(({ written }) => written);
  return [even.from, ...sorted, even.to];
}

/** Every edge once, as a number and as it was typed. */
function edgesAlong(draft, axis) {
  const edges = new Map();
  for (const { face, rectangle } of patchesOf(draft)) {
    const side = axesAcross(axisOf(face)).indexOf(axis);
    if (side < 0) continue;
    for (const typed of [rectangle.from[side], rectangle.to[side]]) {
      const at = lengthIn(typed, draft.units.length);
      if (at !== null) edges.set(Number(at.toPrecision(12)), { at, written: quantity(typed) });
    }
  }
  return [...edges.values()];
}
