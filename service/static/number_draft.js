/** Numbers of the problem that a question varies, as they are chosen and as a request wants them. */

import { catalogueOf } from "./catalogue.js";
import { problemOf } from "./problem_draft.js";
import { newId, resultsOf } from "./result_draft.js";
import { idOf, text } from "./typed.js";

/**
 * @typedef {object} NumberDraft
 * @property {string} id
 * @property {string} key of the entry of the catalogue, or OWN
 * @property {string[]} also keys of further entries that take the same value
 * @property {"at"|"shift"|"scale"} way what a pointer of one's own does
 * @property {string} pointer one or several of one's own, with spaces between
 * @property {string} name
 * @property {Record<string, string>} texts what questions ask of it: a range, a tolerance, a distribution
 */

/** Key of a number whose pointer is typed. */
export const OWN = "own";

/** @returns {NumberDraft} */
export const emptyNumber = (key = "") => ({ id: newId(), key, also: [], way: "at", pointer: "", name: "", texts: {} });

/** Every number of a draft's problem and results. @returns {import("./catalogue.js").Entry[]} */
export const catalogueOfDraft = (draft) => catalogueOf(problemOf(draft, () => {}), resultsOf(draft, () => {}));

/**
 * References of a request as they are chosen.
 * @param {any[]} references @param {any} problem @param {any[]} results of the request
 * @param {(reference: any) => Record<string, string>} textsOf
 * @returns {NumberDraft[]}
 */
export function numberDraftsOf(references, problem, results, textsOf) {
  const catalogue = catalogueOf(problem, results);
  return references.map((reference) => {
    const way = ["at", "shift", "scale"].find((one) => reference[one] !== undefined);
    const pointer = [reference[way]].flat().join(" ");
    const isThere = (key) => catalogue.some((entry) => entry.key === key);
    const each = pointer.split(" ").map((one) => `at ${one}`);
    const keys = isThere(`${way} ${pointer}`) ? [`${way} ${pointer}`] : way === "at" && each.every(isThere) ? each : [OWN];
    return { ...emptyNumber(keys[0]), also: keys.slice(1), way, pointer: keys[0] === OWN ? pointer : "", name: reference.name, texts: textsOf(reference) };
  });
}

/** What each number is called: as typed, or as the catalogue has it. @returns {Map<string, string>} by id */
export function namesOfNumbers(draft, catalogue = catalogueOfDraft(draft)) {
  const names = new Map();
  const taken = new Set(draft.question.numbers.map(({ name }) => name.trim()).filter(Boolean));
  for (const number of draft.question.numbers) {
    let name = number.name.trim();
    if (!name) {
      const plain = catalogue.find(({ key }) => key === number.key)?.name ?? "number";
      name = plain;
      for (let count = 2; taken.has(name); count += 1) name = `${plain} ${count}`;
    }
    taken.add(name);
    names.set(number.id, name);
  }
  return names;
}

/**
 * References to numbers as a request wants them, each place of which is noted with its field.
 * @param {NumberDraft[]} numbers @param {string[]} pointers where each stands in the request
 * @param {(number: NumberDraft, pointer: string, id: string) => any} more what the question adds
 */
export function referencesOf(draft, numbers, pointers, note, more) {
  const names = namesOfNumbers(draft);
  return numbers.map((number, index) => {
    const pointer = pointers[index];
    const id = idOf("number", number.id);
    const isOwn = number.key === OWN;
    const [way, ...places] = isOwn ? [number.way, ...number.pointer.split(/[\s,;]+/).filter(Boolean)]
      : [...number.key.split(" "), ...number.also.map((key) => key.split(" ")[1])];
    note(pointer, idOf(id, "key"));
    note(`${pointer}/name`, idOf(id, "name"));
    for (const one of ["at", "shift", "scale"]) note(`${pointer}/${one}`, idOf(id, isOwn ? "pointer" : "key"));
    return { name: names.get(number.id), [way || "at"]: places.length > 1 ? places : text(places[0]), ...more(number, pointer, id) };
  });
}
