/** Several views of which one is seen, chosen from a list. */

import { make } from "./elements.js";

/**
 * @param {string} label what is chosen
 * @param {[string, () => (Node|string)[]][]} views a name, and what is shown of it
 * @param {string} id of the choice
 * @returns {HTMLElement}
 */
export function switched(label, views, id) {
  const place = make("div", {});
  const show = (index) => place.replaceChildren(...views[index][1]());
  show(0);
  if (views.length === 1) return place;
  const select = make("select", { id, onchange: (event) => show(Number(event.target.value)) },
    views.map(([name], index) => make("option", { value: index }, name)));
  return make("div", {}, make("div", { class: "tools chosen" }, make("label", { for: id }, label), select), place);
}
