/** The fields of the numbers a question varies: which of the problem's, and what the question asks of each. */

import { button, choice, field, make, mistakePlace, writer } from "./elements.js";
import { listChoice } from "./lists.js";
import { catalogueOfDraft, emptyNumber, namesOfNumbers, OWN } from "./number_draft.js";
import { written } from "./numbers.js";
import { idOf } from "./typed.js";

/** @returns {import("./lists.js").Group[]} */
function numberEntries(draft) {
  const groups = new Map();
  for (const { group, key, label } of catalogueOfDraft(draft)) {
    if (!groups.has(group)) groups.set(group, []);
    groups.get(group).push([key, label]);
  }
  return [...groups, ["By a pointer of your own", [[OWN, "a place in the request"]]]];
}

/**
 * @param {any} draft @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 * @param {{mostNumbers: number, fieldsOfNumber: (number: any, id: string, spoken: string, changed: () => void, again: (focus: string) => void) => any[]}} question
 */
export function numberFields(draft, changed, redraw, question) {
  const { numbers } = draft.question;
  const again = (focus) => {
    changed();
    redraw("decision");
    document.getElementById(focus)?.focus();
  };
  const cards = numbers.slice(0, question.mostNumbers).map((_, index) => numberCard(draft, index, changed, again, question));
  const add = button(
    {
      id: "add-number",
      onclick: () => {
        numbers.push(emptyNumber(catalogueOfDraft(draft).find(({ key }) => numbers.every((number) => number.key !== key))?.key));
        again(idOf("number", numbers.at(-1).id, "key"));
      },
    },
    "Add a number",
  );
  return [
    ...cards,
    numbers.length < question.mostNumbers ? add : null,
    make("div", { id: "numbers", role: "group", "aria-label": "Numbers", tabindex: -1, class: "whole" }, mistakePlace("numbers")),
  ].filter(Boolean);
}

function numberCard(draft, index, changed, again, question) {
  const number = draft.question.numbers[index];
  const id = idOf("number", number.id);
  const spoken = `Number ${index + 1}`;
  const own = [
    choice({
      id: idOf(id, "way"), label: "The number", spoken, value: number.way, onChange: writer(number, "way", changed),
      options: [["at", "stands there"], ["shift", "is added there"], ["scale", "multiplies what is there"]],
    }),
    field({
      id: idOf(id, "pointer"), label: "Pointer into the request", spoken, value: number.pointer, isText: true, extraClass: "whole",
      hint: "Such as /problem/faces/x_high/coefficient; several with spaces between.", onInput: writer(number, "pointer", changed),
    }),
  ];
  const remove = button(
    {
      class: "small quiet beside",
      onclick: () => {
        draft.question.numbers.splice(index, 1);
        again("add-number");
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make(
    "fieldset", { class: "patch" }, make("legend", {}, spoken),
    listChoice({
      id: idOf(id, "key"), label: "Which", spoken, value: number.key, extraClass: "whole", groupsOf: () => numberEntries(draft),
      gone: number.key ? "no longer there" : "choose a number of the problem",
      onChange: (value) => {
        Object.assign(number, { key: value, also: [] });
        again(idOf(id, "key"));
      },
    }),
    number.key === OWN ? own : null,
    make("p", { class: "hint whole", "data-now": number.id }),
    number.key.startsWith("at ") ? alsoFields(draft, number, id, spoken, again) : null,
    ...question.fieldsOfNumber(number, id, spoken, changed, again),
    field({ id: idOf(id, "name"), label: "Name (optional)", spoken, value: number.name, isText: true, onInput: writer(number, "name", changed) }),
    remove,
  );
}

/** Further places that take the same value: those that stand already, and one to add. */
function alsoFields(draft, number, id, spoken, again) {
  const entries = () => {
    const catalogue = catalogueOfDraft(draft);
    const kind = catalogue.find(({ key }) => key === number.key)?.kind;
    return catalogue.filter((entry) => entry.way === "at" && entry.kind === kind && entry.key !== number.key).map(({ key, label }) => [key, label]);
  };
  if (!entries().length && !number.also.length) return null;
  const choices = [...number.also, ""].map((chosen, index) => listChoice({
    id: idOf(id, "also", index), label: "Also", spoken, value: chosen, extraClass: "whole", groupsOf: () => [[null, [["", "nothing else"], ...entries()]]],
    onChange: (value) => {
      number.also.splice(index, 1, ...(value ? [value] : []));
      again(idOf(id, "also", index));
    },
  }));
  return make("details", { class: "whole", open: number.also.length > 0 }, make("summary", {}, "The same value elsewhere"), make("div", { class: "fields" }, choices));
}

/** A field for one of a number's texts. */
export const numberText = (number, id, spoken, changed, key, label, more = {}) =>
  field({ id: idOf(id, key), label, spoken, value: number.texts[key] ?? "", onInput: writer(number.texts, key, changed), ...more });

/** Write where each number stands now, and what it is called without a name. @param {Record<string, string>} units by kind */
export function showNumbers(draft, units) {
  const catalogue = catalogueOfDraft(draft);
  const names = namesOfNumbers(draft, catalogue);
  for (const number of draft.question.numbers) {
    const input = document.getElementById(idOf("number", number.id, "name"));
    if (input) input.placeholder = names.get(number.id);
    const place = document.querySelector(`[data-now="${number.id}"]`);
    if (place) place.textContent = nowOf(catalogue.find(({ key }) => key === number.key), units);
  }
}

function nowOf(entry, units) {
  if (!entry) return "";
  if (entry.way === "shift") return "0 as it stands: it is added to both ends.";
  if (entry.way === "scale") return "1 as it stands: it multiplies all of them.";
  return `Now ${written(entry.given, units[entry.kind] ?? "")}.`;
}

/** Units of the numbers, by the kinds their fields name: of the number itself, and of differences of it. */
export function unitsOfNumbers(draft, units) {
  const catalogue = catalogueOfDraft(draft);
  return Object.fromEntries(draft.question.numbers.flatMap((number) => {
    const kind = catalogue.find(({ key }) => key === number.key)?.kind ?? "";
    return [[`number-${number.id}`, units[kind] ?? ""], [`step-${number.id}`, units[kind === "potential" ? "difference" : kind] ?? ""]];
  }));
}
