/** The plane of an answer as rows and columns, its table, and its text for saving. */

import { make, save } from "./elements.js";
import { brief, greatest, pretty, shown, withoutRounding } from "./numbers.js";

/**
 * @typedef {object} PlaneData
 * @property {string} axis the plane is square to
 * @property {number} position
 * @property {string} across axis drawn to the right
 * @property {string} up axis drawn upwards
 * @property {number[]} columns places to the right
 * @property {number[]} rows places upwards
 * @property {number[][]} values rows of columns
 * @property {number} lowest
 * @property {number} highest
 * @property {number} bound
 * @property {any[]} [layers] the planes of the layers of a stack, where this one stands for all of them
 */

/** z is drawn to the right where it is in the plane, as in the sketch. @returns {PlaneData} */
export function planeOf(answer, axis) {
  const [grid] = answer.grids;
  const [across, up] = { x: ["z", "y"], y: ["z", "x"], z: ["x", "y"] }[axis];
  return planeOfGrid(grid, axis, across, up);
}

/**
 * The section through a stack, one plane for each layer from below: z is drawn upwards, as layers lie.
 * @returns {PlaneData[]}
 */
export const layersOf = (answer, axis) => answer.grids.map((grid) => planeOfGrid(grid, axis, axis === "x" ? "y" : "x", "z"));

function planeOfGrid(grid, axis, across, up) {
  const cleared = (places) => places.map((place) => withoutRounding(place, greatest(places)));
  const columns = cleared(grid.axes[across]);
  const rows = cleared(grid.axes[up]);
  const at = (row, column) => {
    const index = { [axis]: 0, [across]: column, [up]: row };
    return grid.potential[index.x][index.y][index.z];
  };
  const values = rows.map((_, row) => columns.map((__, column) => at(row, column)));
  return { axis, position: grid.axes[axis][0], across, up, columns, rows, values, ...rangeOf(values.flat()), bound: grid.error_bound };
}

const rangeOf = (all) => ({ lowest: all.reduce((a, b) => Math.min(a, b)), highest: all.reduce((a, b) => Math.max(a, b)) });

/**
 * One plane that stands for all layers: their rows one above the other, both sides of each interface among them.
 * @param {PlaneData[]} layers @param {{name: string, hasContact: boolean}[]} described
 * @returns {PlaneData & {layers: (PlaneData & {name: string, hasContact: boolean})[]}}
 */
export const joined = (layers, described) => ({
  ...layers[0],
  layers: layers.map((layer, index) => ({ ...layer, ...described[index] })),
  rows: layers.flatMap(({ rows }) => rows),
  values: layers.flatMap(({ values }) => values),
  lowest: Math.min(...layers.map(({ lowest }) => lowest)),
  highest: Math.max(...layers.map(({ highest }) => highest)),
  bound: Math.max(...layers.map(({ bound }) => bound)),
});

/** Every so many of some indices, both ends among them. */
function thinned(count, most) {
  const wanted = Math.min(count, most);
  return Array.from({ length: wanted }, (_, index) => Math.round((index * (count - 1)) / (wanted - 1)));
}

/** Indices of places about evenly apart, both ends among them. @param {number[]} places */
function spread(places, most) {
  const [first, last] = [places[0], places.at(-1)];
  const nearest = (wanted) => places.reduce((best, place, index) => (
    Math.abs(place - wanted) < Math.abs(places[best] - wanted) ? index : best), 0);
  return [...new Set(thinned(most, most).map((index) => nearest(first + ((last - first) * index) / (most - 1))))];
}

/** A table of part of the values, upwards as in the picture. @param {PlaneData} plane */
export function planeTable(plane, words, units) {
  const columns = spread(plane.columns, 9);
  // Of a stack every layer has its rows, however thin it is.
  const rows = (plane.layers ? thinned(plane.rows.length, 13) : spread(plane.rows, 13)).reverse();
  return make(
    "table", { class: "numbers" },
    make("caption", {}, `${words.potential} in ${pretty(units.potential)}; ${plane.across} and ${plane.up} in ${pretty(units.length)}`),
    make("thead", {}, make("tr", {},
      make("th", { scope: "col" }, `${plane.up} \\ ${plane.across}`),
      columns.map((column) => make("th", { scope: "col" }, brief(plane.columns[column]))))),
    make("tbody", {}, rows.map((row) => make("tr", {},
      make("th", { scope: "row" }, brief(plane.rows[row])),
      columns.map((column) => make("td", {}, shown(plane.values[row][column], Math.max(plane.bound, tableStep(plane)))))))),
  );
}

/** A table is for a look: a hundred thousandth of the range is enough. */
const tableStep = (plane) => (plane.highest - plane.lowest) * 1e-5;

/** Save all values as CSV, in the shape in which readings of a face are read. @param {PlaneData} plane */
export function savePlane(plane, words, units) {
  const head = [`${plane.up}/${plane.across} [${units.length}], ${words.potential} [${units.potential}]`.replace(/,/g, ""), ...plane.columns];
  const lines = [head, ...plane.rows.map((place, row) => [place, ...plane.values[row]])];
  save(`plane_${plane.axis}_${plane.position}.csv`, `${lines.map((line) => line.join(",")).join("\n")}\n`, "text/csv");
}
