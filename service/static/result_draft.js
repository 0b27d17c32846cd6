/** Results with names: the single numbers that are read off the field, as they are typed and as a request wants them. */

import { regionDraftOf, regionOf, regionWords } from "./regions.js";
import { entry, idOf, quantity, text } from "./typed.js";
import { AXES, differenceUnit } from "./words.js";

/**
 * @typedef {object} ResultDraft
 * @property {string} id by which limits and other results speak of it, whatever it is called
 * @property {string} kind
 * @property {string} name
 * @property {string[]} at a place
 * @property {string} along axis of a slope or a flow per area, or nothing for its size
 * @property {string} side which side of an interface
 * @property {string} region of a mean, an extreme or an inflow, see regions.js
 * @property {string[]} from ends of a rectangle or box along x, y and z
 * @property {string[]} to
 * @property {string} axis of a plane
 * @property {string} position of it
 * @property {string} face that reaches
 * @property {string} fraction
 * @property {string} of id of a result
 * @property {string} other id of the result taken off or divided by
 */

/** What has a place, what a part of the body, what is made of two results. */
export const AT_A_PLACE = ["potential", "gradient", "flux"];
export const OF_A_PART = ["mean", "highest", "lowest", "inflow"];
export const OF_TWO = { difference: "less", ratio: "over" };

let last = 0;
/** An id that no other part of a draft has, kept ones among them. */
export const newId = () => `${Date.now().toString(36)}${(last += 1)}`;

/** @returns {ResultDraft} */
export const emptyResult = (kind = "highest") => ({
  id: newId(), kind, name: "", at: ["", "", ""], along: "", side: "", region: "body",
  from: ["", "", ""], to: ["", "", ""], axis: "z", position: "", face: "", fraction: "0.1", of: "", other: "",
});

/** Results as they are typed. @param {any[]} results @param {any} problem both of a request @returns {ResultDraft[]} */
export function resultDraftsOf(results, problem) {
  const drafts = [];
  const idNamed = (name) => drafts.find((draft) => draft.name === name)?.id ?? "";
  for (const result of results) {
    const draft = emptyResult(result.result);
    const plane = AXES.find((axis) => result.result === "flow" && result[axis] !== undefined);
    Object.assign(draft, {
      name: result.name, along: text(result.along), side: result.side === "above" ? "above" : "", fraction: text(result.fraction) || "0.1",
      of: idNamed(result.of), other: idNamed(result.less ?? result.over),
    });
    if (result.at) draft.at = result.at.map(text);
    if (OF_A_PART.includes(result.result)) Object.assign(draft, regionDraftOf(result, problem));
    if (plane) Object.assign(draft, { axis: plane, position: text(result[plane]) });
    if (result.result === "reach") draft.face = result.face;
    drafts.push(draft);
  }
  return drafts;
}

/** What each result is called: as typed, or after what it is. @returns {Map<string, string>} by id */
export function namesOf(draft) {
  const names = new Map();
  const taken = new Set(draft.results.map(({ name }) => name.trim()).filter(Boolean));
  for (const result of draft.results) {
    let name = result.name.trim();
    if (!name) {
      const plain = plainName(draft, result, names);
      name = plain;
      for (let number = 2; taken.has(name); number += 1) name = `${plain} ${number}`;
    }
    taken.add(name);
    names.set(result.id, name);
  }
  return names;
}

function plainName(draft, result, names) {
  const { kind } = result;
  if (AT_A_PLACE.includes(kind)) {
    const what = { potential: "", gradient: "slope ", flux: "flow per area " }[kind];
    return `${what}at ${result.at.map((typed) => typed.trim() || "?").join(", ")}`;
  }
  if (OF_A_PART.includes(kind)) return `${kind}, ${regionWords(draft, result.region)}`;
  if (kind === "flow") return `flow at ${result.axis} = ${result.position.trim() || "?"}`;
  if (kind === "reach") return `reach of ${result.face.replace("_", " ")}`;
  return `${names.get(result.of) ?? "?"} ${OF_TWO[kind]} ${names.get(result.other) ?? "?"}`;
}

/** Results as a request wants them, each place of which is noted with its field. */
export function resultsOf(draft, note) {
  const names = namesOf(draft);
  note("#/results", "add-result");
  return draft.results.map((result, index) => {
    const pointer = `#/results/${index}`;
    const id = idOf("result", result.id);
    note(pointer, idOf(id, "kind"));
    note(`${pointer}/name`, idOf(id, "name"));
    return { name: names.get(result.id), result: result.kind, ...detailsOf(draft, result, names, pointer, id, note) };
  });
}

function detailsOf(draft, result, names, pointer, id, note) {
  const { kind } = result;
  if (AT_A_PLACE.includes(kind)) {
    note(`${pointer}/at`, idOf(id, "x"));
    AXES.forEach((axis, side) => note(`${pointer}/at/${side}`, idOf(id, axis)));
    note(`${pointer}/side`, idOf(id, "side"));
    return {
      at: result.at.map(entry),
      ...(kind !== "potential" && result.along ? { along: result.along } : {}), ...(draft.isStack && result.side ? { side: result.side } : {}),
    };
  }
  if (OF_A_PART.includes(kind)) {
    for (const key of ["face", "patch", "layer"]) note(`${pointer}/${key}`, idOf(id, "region"));
    for (const here of [pointer, `${pointer}/box`]) {
      for (const axis of AXES) {
        note(`${here}/${axis}`, idOf(id, axis, "from"));
        note(`${here}/${axis}/0`, idOf(id, axis, "from"));
        note(`${here}/${axis}/1`, idOf(id, axis, "to"));
      }
    }
    return { ...regionOf(draft, result), ...(kind === "inflow" ? gapOf(draft, pointer, note) : {}) };
  }
  if (kind === "flow") {
    for (const axis of AXES) note(`${pointer}/${axis}`, idOf(id, "position"));
    return { [result.axis]: quantity(result.position), ...gapOf(draft, pointer, note) };
  }
  if (kind === "reach") {
    note(`${pointer}/face`, idOf(id, "face"));
    note(`${pointer}/fraction`, idOf(id, "fraction"));
    return { face: result.face || undefined, fraction: quantity(result.fraction) };
  }
  note(`${pointer}/of`, idOf(id, "of"));
  note(`${pointer}/${OF_TWO[kind]}`, idOf(id, "other"));
  return { of: names.get(result.of) ?? "", [OF_TWO[kind]]: names.get(result.other) ?? "" };
}

/** The strip left out of flows is one for all of them. */
function gapOf(draft, pointer, note) {
  note(`${pointer}/edge_gap`, "edge-gap");
  return draft.edgeGap.trim() ? { edge_gap: quantity(draft.edgeGap) } : {};
}

const inBrackets = (unit) => (/[\s*/]/.test(unit) ? `(${unit})` : unit);

/**
 * The unit a result is told in, and that of differences of it; nothing where it is made of results that are missing.
 * @returns {{unit: string, difference: string}}
 */
export function unitsOfResult(draft, id) {
  const { units } = draft;
  const index = draft.results.findIndex((result) => result.id === id);
  if (index < 0) return { unit: "", difference: "" };
  const { kind, of, other } = draft.results[index];
  const difference = differenceUnit(draft);
  const plain = (unit) => ({ unit, difference: unit });
  if (["potential", "mean", "highest", "lowest"].includes(kind)) return { unit: units.potential, difference };
  if (kind === "gradient") return plain(`${difference}/${inBrackets(units.length)}`);
  if (kind === "flux") return plain(units.flux);
  if (kind === "inflow" || kind === "flow") return plain(units.flow);
  if (kind === "reach") return plain(units.length);
  // Only results before this one count, so that none is made of itself.
  const before = { ...draft, results: draft.results.slice(0, index) };
  const [first, second] = [unitsOfResult(before, of), unitsOfResult(before, other)];
  if (kind === "difference") return plain(first.difference);
  return plain(first.unit === second.unit ? "" : second.unit ? `${first.unit}/${inBrackets(second.unit)}` : first.unit);
}
