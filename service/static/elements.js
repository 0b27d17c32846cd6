/** Building blocks of the page: elements, labelled fields with a unit and a place for a mistake. */

import { pretty } from "./numbers.js";
import { idOf } from "./typed.js";

/**
 * An element with attributes, listeners (keys that begin with "on") and children.
 * @param {string} tag
 * @param {Record<string, any>} [attributes] null and false leave an attribute out
 * @param {...(Node|string|null)} children
 * @returns {any}
 */
export function make(tag, attributes = {}, ...children) {
  return filled(document.createElement(tag), attributes, children);
}

/** The same for a drawing. @returns {any} */
export function draw(tag, attributes = {}, ...children) {
  return filled(document.createElementNS("http://www.w3.org/2000/svg", tag), attributes, children);
}

function filled(element, attributes, children) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value === null || value === undefined || value === false) continue;
    if (name.startsWith("on")) element.addEventListener(name.slice(2), value);
    else if (name === "value") element.value = value;
    else element.setAttribute(name, value === true ? "" : String(value));
  }
  element.append(...children.flat(Infinity).filter((child) => child !== null && child !== undefined));
  return element;
}

/** The place under a field where a sentence about it appears. */
export function mistakePlace(id) {
  return make("p", { class: "mistake", id: `${id}-mistake`, hidden: true });
}

/**
 * @typedef {object} FieldText
 * @property {string} id
 * @property {string} label
 * @property {string} value
 * @property {(value: string) => void} onInput
 * @property {string} [kind] what it measures; its unit is shown behind the input, see showUnits
 * @property {string} [hint] shown under it
 * @property {string} [list] id of a datalist
 * @property {string} [spoken] label for those who cannot see what stands around, if it has to say more
 * @property {boolean} [isText] plain words, no quantity
 * @property {string} [extraClass]
 */

/**
 * Write the units behind all fields. They change while someone types, so no field may be made anew for it.
 * @param {Record<string, string>} units by kind
 */
export function showUnits(units) {
  for (const place of document.querySelectorAll(".unit[data-kind]")) place.textContent = pretty(units[place.dataset.kind] ?? "");
}

/** A labelled input. @param {FieldText} text @returns {HTMLElement} */
export function field(text) {
  const { id, label, value, onInput, kind, hint, list, spoken, isText, extraClass } = text;
  const described = [kind ? `${id}-unit` : "", hint ? `${id}-hint` : "", `${id}-mistake`];
  const input = make("input", {
    id,
    value,
    list,
    type: "text",
    class: isText ? "words" : "quantity",
    autocomplete: "off",
    autocapitalize: "off",
    spellcheck: "false",
    "aria-describedby": described.filter(Boolean).join(" "),
    oninput: (event) => onInput(event.target.value),
  });
  return make(
    "div",
    { class: `field ${extraClass ?? ""}` },
    labelOf(id, label, spoken),
    make(
      "div",
      { class: "entry" },
      input,
      kind ? make("span", { class: "unit", id: `${id}-unit`, "data-kind": kind }) : null,
    ),
    hint ? make("p", { class: "hint", id: `${id}-hint` }, hint) : null,
    mistakePlace(id),
  );
}

/**
 * A labelled choice.
 * @param {{id: string, label: string, value: string, options: [string, string][],
 *   onChange: (value: string) => void, spoken?: string, hint?: string, extraClass?: string}} text
 * @returns {HTMLElement}
 */
export function choice({ id, label, value, options, onChange, spoken, hint, extraClass }) {
  const select = make(
    "select",
    {
      id,
      "aria-describedby": [hint ? `${id}-hint` : "", `${id}-mistake`].filter(Boolean).join(" "),
      onchange: (event) => onChange(event.target.value),
    },
    options.map(([key, words]) => make("option", { value: key }, words)),
  );
  select.value = value;
  return make(
    "div",
    { class: `field ${extraClass ?? ""}` },
    labelOf(id, label, spoken),
    make("div", { class: "entry" }, select),
    hint ? make("p", { class: "hint", id: `${id}-hint` }, hint) : null,
    mistakePlace(id),
  );
}

/** A labelled text of several lines. @returns {HTMLElement} */
export function longText({ id, label, value, onInput, hint, rows = 5, spoken = "" }) {
  const area = make("textarea", {
    id,
    rows,
    value,
    spellcheck: "false",
    "aria-describedby": `${hint ? `${id}-hint ` : ""}${id}-mistake`,
    oninput: (event) => onInput(event.target.value),
  });
  return make(
    "div",
    { class: "field whole" },
    labelOf(id, label, spoken),
    area,
    hint ? make("p", { class: "hint", id: `${id}-hint` }, hint) : null,
    mistakePlace(id),
  );
}

function labelOf(id, label, spoken) {
  return make("label", { for: id }, spoken ? make("span", { class: "unseen" }, `${spoken}: `) : null, label);
}

/** What writes a text into a draft's part. */
export const writer = (owner, key, changed) => (value) => {
  owner[key] = value;
  changed();
};

/** A small button. @param {Record<string, any>} attributes @returns {any} */
export const button = (attributes, ...words) => make("button", { type: "button", class: "small", ...attributes }, ...words);

/** From and to along some axes; the texts stand in `owner.from` and `owner.to`, one for each axis. */
export function intervals(axes, owner, part, spoken, changed) {
  return axes.flatMap((axis, side) =>
    ["from", "to"].map((end) =>
      field({
        id: idOf(part, axis, end),
        label: `${axis} ${end}`,
        spoken,
        kind: "length",
        value: owner[end][side],
        onInput: (value) => {
          owner[end][side] = value;
          changed();
        },
      }),
    ),
  );
}

/** Save a blob or text under a file name. */
export function save(name, content, type) {
  const address = URL.createObjectURL(new Blob([content], { type }));
  const link = make("a", { href: address, download: name });
  document.body.append(link);
  link.click();
  link.remove();
  setTimeout(() => URL.revokeObjectURL(address), 1000);
}

/** A sentence behind a sign and a word, so that colour is not alone. @param {"good"|"bad"|"open"} kind */
export function verdict(kind, title, sentence) {
  const sign = { good: "\u2713", bad: "\u2717", open: "\u25cb" }[kind];
  return make("p", { class: `verdict ${kind}` },
    make("span", { class: "sign", "aria-hidden": "true" }, sign),
    make("span", {}, make("strong", {}, `${title}. `), sentence));
}

/** A wide table may be moved sideways by itself. */
export function scrolled(table, label) {
  return make("div", { class: "scrolled", tabindex: 0, role: "region", "aria-label": label }, table);
}
