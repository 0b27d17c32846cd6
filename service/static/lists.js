/** Choices whose entries follow what is typed elsewhere in the form. */

import { make, mistakePlace } from "./elements.js";

/**
 * @typedef {[string|null, [string, string][]]} Group a heading, or none, and entries: key and words
 */

/**
 * A labelled choice of entries in groups that are made anew whenever anything is typed, see `refreshLists`.
 * @param {{id: string, label: string, value: string, groupsOf: () => Group[], onChange: (value: string) => void,
 *   spoken?: string, hint?: string, extraClass?: string, gone?: string}} text
 *   gone: what is said of a value that is not among the entries
 * @returns {HTMLElement}
 */
export function listChoice({ id, label, value, groupsOf, onChange, spoken, hint, extraClass, gone = "no longer there" }) {
  const select = make("select", {
    id, "data-list": true,
    "aria-describedby": [hint ? `${id}-hint` : "", `${id}-mistake`].filter(Boolean).join(" "),
    onchange: (event) => onChange(event.target.value),
  });
  let wanted = value;
  let listed = "";
  select.addEventListener("change", () => {
    wanted = select.value;
  });
  select.refresh = () => {
    const groups = groupsOf();
    const now = JSON.stringify(groups);
    if (now === listed) return;
    listed = now;
    const isThere = groups.some(([, entries]) => entries.some(([key]) => key === wanted));
    const option = ([key, words]) => make("option", { value: key }, words);
    select.replaceChildren(
      ...(isThere ? [] : [make("option", { value: wanted }, gone)]),
      ...groups.flatMap(([heading, entries]) => (heading === null ? entries.map(option) : [make("optgroup", { label: heading }, entries.map(option))])),
    );
    select.value = wanted;
  };
  select.refresh();
  return make(
    "div", { class: `field ${extraClass ?? ""}` },
    make("label", { for: id }, spoken ? make("span", { class: "unseen" }, `${spoken}: `) : null, label),
    make("div", { class: "entry" }, select),
    hint ? make("p", { class: "hint", id: `${id}-hint` }, hint) : null,
    mistakePlace(id),
  );
}

/**
 * Several of a list, each with a tick. What is ticked and no longer there stays ticked until it is there again.
 * @param {{id: string, label: string, ticked: string[], entriesOf: () => [string, string][], onChange: (ticked: string[]) => void,
 *   hint?: string, nothing: string}} text
 *   nothing: what is said where there is nothing to tick
 * @returns {HTMLElement}
 */
export function listTicks({ id, label, ticked, entriesOf, onChange, hint, nothing }) {
  let chosen = [...ticked];
  let listed = "";
  const place = make("div", { class: "ticks", "data-list": true });
  const toggle = (key) => (event) => {
    chosen = event.target.checked ? [...chosen, key] : chosen.filter((other) => other !== key);
    onChange(chosen);
  };
  place.refresh = () => {
    const entries = entriesOf();
    const now = JSON.stringify(entries);
    if (now === listed) return;
    listed = now;
    place.replaceChildren(...(entries.length ? entries.map(([key, words]) => make("label", { class: "tick" },
      make("input", { type: "checkbox", checked: chosen.includes(key), onchange: toggle(key) }), words)) : [make("p", { class: "hint" }, nothing)]));
  };
  place.refresh();
  return make("fieldset", { class: "whole ticked", id, tabindex: -1 }, make("legend", {}, label), place, hint ? make("p", { class: "hint" }, hint) : null, mistakePlace(id));
}

/** Make the entries of all such choices anew where they have changed. */
export function refreshLists() {
  for (const list of document.querySelectorAll("[data-list]")) list.refresh();
}
