/** The part of the form for limits: what results must not pass. */

import { button, field, make, mistakePlace, writer } from "./elements.js";
import { emptyLimit } from "./limit_draft.js";
import { listChoice } from "./lists.js";
import { resultEntries } from "./result_form.js";
import { idOf } from "./typed.js";

/**
 * @param {any} draft
 * @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 */
export function limitFields(draft, changed, redraw) {
  const again = (focus) => {
    changed();
    redraw("limits");
    document.getElementById(focus)?.focus();
  };
  const add = button(
    {
      id: "add-limit",
      onclick: () => {
        const unlimited = draft.results.find(({ id }) => draft.limits.every(({ result }) => result !== id));
        draft.limits.push(emptyLimit((unlimited ?? draft.results.at(-1))?.id));
        again(idOf("limit", draft.limits.length - 1, "result"));
      },
    },
    "Add a limit",
  );
  const cards = draft.limits.map((_, index) => limitCard(draft, index, changed, again));
  const nothing = draft.limits.length ? [] : [make("p", { class: "hint whole" }, draft.results.length
    ? "What results must not pass. Whether each holds, and by how much, is computed together with the field." : "A limit is about a result; name one first.")];
  return [...nothing, ...cards, add, mistakePlace("add-limit")];
}

function limitCard(draft, index, changed, again) {
  const limit = draft.limits[index];
  const id = idOf("limit", index);
  const spoken = `Limit ${index + 1}`;
  const kind = `result-${limit.result}`;
  const text = (key, part, label, more) =>
    field({ id: idOf(id, part), label, spoken, value: limit[key], onInput: writer(limit, key, changed), ...more });
  const remove = button(
    {
      class: "small quiet beside",
      onclick: () => {
        draft.limits.splice(index, 1);
        again("add-limit");
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make(
    "fieldset", { class: "patch" }, make("legend", {}, spoken),
    listChoice({
      id: idOf(id, "result"), label: "Result", spoken, value: limit.result, extraClass: "whole", groupsOf: () => resultEntries(draft),
      gone: draft.results.length ? "choose a result" : "no result is named yet",
      onChange: (value) => {
        limit.result = value;
        again(idOf(id, "result"));
      },
    }),
    text("atMost", "at-most", "At most", { kind }), text("atLeast", "at-least", "At least", { kind }),
    text("name", "name", "Name (optional)", { isText: true }),
    remove,
  );
}
