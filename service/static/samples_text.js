/** Readings of a face as text, and as axes with a table between them. */

import { axesAcross, axisOf } from "./words.js";

/** @param {any} map of samples with axes and a table */
export function textOfSamples(map, face) {
  const [first, second] = axesAcross(axisOf(face));
  const head = [`${first}/${second}`, ...map[second]];
  return [head, ...map[first].map((place, row) => [place, ...map.table[row].map((entry) => entry ?? "")])].map((row) => row.join(",")).join("\n");
}

/** Axes and table of a text; what is no number stays as it is, and the service says so. @param {string} text */
export function samplesOfText(text, face) {
  const [first, second] = axesAcross(axisOf(face));
  const separator = [";", "\t", ","].find((one) => text.includes(one)) ?? ",";
  const numberOf = (cell) => {
    const typed = cell.trim().replace(separator === "," ? /$^/ : ",", ".");
    if (typed === "") return null;
    return Number.isFinite(Number(typed)) ? Number(typed) : typed;
  };
  const [head, ...rows] = text.split("\n").filter((line) => line.trim()).map((line) => line.split(separator).map(numberOf));
  return { [first]: rows.map(([place]) => place), [second]: (head ?? []).slice(1), table: rows.map((row) => row.slice(1)) };
}
