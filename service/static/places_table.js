/** Places with readings pasted as a table: results at places, and what was read there. */

import { emptyResult } from "./result_draft.js";

/** Rows of a pasted table: name, three coordinates, reading, uncertainty; a head without numbers is left out. */
function rowsOf(table) {
  const separator = [";", "\t", ","].find((one) => table.includes(one)) ?? ",";
  const rows = table.split("\n").filter((line) => line.trim()).map((line) => line.split(separator).map((cell) => cell.trim()));
  return rows.filter(([, x = ""], index) => index > 0 || /\d|low|middle|high/.test(x));
}

/** Make results and readings of the table that is typed. A place whose name is there already gets another reading. @param {any} draft */
export function takeOver(draft) {
  const own = draft.question.own.calibration;
  for (const [name = "", x = "", y = "", z = "", value = "", uncertainty = ""] of rowsOf(own.table)) {
    let result = draft.results.find((one) => one.name.trim() === name && name);
    if (!result) {
      result = { ...emptyResult("potential"), name, at: [x, y, z] };
      draft.results.push(result);
    }
    if (value) own.readings.push({ result: result.id, value, uncertainty: uncertainty || own.readings.at(-1)?.uncertainty || "" });
  }
  own.table = "";
}
