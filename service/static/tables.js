/** Tables of answers to questions: numbers with their bounds under them, and signs that do without colour. */

import { make, scrolled } from "./elements.js";
import { bounded, greatest, placed, pretty, shown } from "./numbers.js";
import { AXES } from "./words.js";

/** A cell with a value over its bound. @param {number|null} value @param {number|null} [bound] null where none is known */
export function valueCell(value, bound = null, attributes = {}) {
  if (value === null) return make("td", { class: "no-value", ...attributes }, "none");
  const said = bound === null ? null : make("span", { class: "known" }, bound > 0 ? `\u00b1 ${bounded(bound)}` : "exact");
  return make("td", attributes, shown(value, bound ?? 0), said);
}

/** A value with its unit. */
export const withUnit = (words, unit) => (unit && unit !== "1" ? `${words} ${pretty(unit)}` : words);

/** A heading with a unit behind it. */
export const headed = (words, unit) => (unit && unit !== "1" ? `${words}, ${pretty(unit)}` : words);

/** The unit of differences of a result told in a unit. @param {any} units of an answer */
export const differenceOf = (unit, units) => (unit === units.potential ? units.potential_difference : unit);

/** @param {string} caption @param {string[]} heads @param {any[]} rows of cells @param {string} [name] of its class */
export const table = (caption, heads, rows, name = "") => scrolled(
  make("table", { class: `numbers ${name}` },
    make("caption", {}, caption),
    make("thead", {}, make("tr", {}, heads.map((head) => make("th", { scope: "col" }, head)))),
    make("tbody", {}, rows.map((row) => make("tr", {}, row)))),
  caption,
);

/** The head of a row, with a smaller line under it. */
export const rowHead = (words, under = null) => make("th", { scope: "row" }, words, under ? make("span", { class: "known" }, under) : null);

const SIGNS = { yes: ["good", "\u2713", "held"], no: ["bad", "\u2717", "not held"], undecided: ["open", "\u25cb", "undecided"] };

/** Whether something holds, as a sign and a word. @param {"yes"|"no"|"undecided"|null} held */
export function heldWord(held) {
  if (!held) return make("span", {}, "\u2013");
  const [kind, sign, words] = SIGNS[held];
  return make("span", { class: `held ${kind}` }, make("span", { class: "sign", "aria-hidden": "true" }, sign), make("strong", {}, words));
}

/** What a limit asks, in words: "at most 95 °C". @param {any} limit of an answer */
export function limitWords({ at_most: most, at_least: least }, unit) {
  const sides = [most === undefined ? null : `at most ${withUnit(shown(most), unit)}`, least === undefined ? null : `at least ${withUnit(shown(least), unit)}`];
  return sides.filter(Boolean).join(" and ");
}

/** Where the extreme of a result was found, in words. @param {{at?: (number|null)[]}} result @param {any} units of its answer */
export function placeWords({ at }, units) {
  if (!at) return null;
  const scale = greatest(at);
  return at.map((length, index) => (length === null ? `infinitely far along ${AXES[index]}` : `${AXES[index]} = ${placed(length, scale)}`)).join(", ").concat(" ", pretty(units.length));
}
