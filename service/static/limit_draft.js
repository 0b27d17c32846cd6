/** What results must not pass, as it is typed and as a request wants it. */

import { namesOf } from "./result_draft.js";
import { idOf, quantity, text } from "./typed.js";

/**
 * @typedef {object} LimitDraft
 * @property {string} result id of a result
 * @property {string} name
 * @property {string} atMost
 * @property {string} atLeast
 */

/** @returns {LimitDraft} */
export const emptyLimit = (result = "") => ({ result, name: "", atMost: "", atLeast: "" });

/** @param {any[]} limits of a request @param {import("./result_draft.js").ResultDraft[]} results @returns {LimitDraft[]} */
export const limitDraftsOf = (limits, results) => limits.map((limit) => ({
  result: results.find(({ name }) => name === limit.result)?.id ?? "", name: text(limit.name),
  atMost: text(limit.at_most), atLeast: text(limit.at_least),
}));

/** Limits as a request wants them, each place of which is noted with its field. */
export function limitsOf(draft, note) {
  const names = namesOf(draft);
  note("#/limits", "add-limit");
  return draft.limits.map((limit, index) => {
    const pointer = `#/limits/${index}`;
    const id = idOf("limit", index);
    note(pointer, idOf(id, "at-most"));
    for (const [key, part] of [["result", "result"], ["at_most", "at-most"], ["at_least", "at-least"], ["name", "name"]]) note(`${pointer}/${key}`, idOf(id, part));
    return {
      ...(limit.name.trim() ? { name: limit.name.trim() } : {}), result: names.get(limit.result) ?? "",
      at_most: quantity(limit.atMost), at_least: quantity(limit.atLeast),
    };
  });
}
