/** Sentences of the service beside the fields they are about, and all of them in a summary. */

import { make } from "./elements.js";

/** Take all sentences away. */
export function clearMistakes() {
  for (const place of document.querySelectorAll(".mistake")) {
    place.hidden = true;
    place.textContent = "";
  }
  for (const input of document.querySelectorAll("[aria-invalid]")) input.removeAttribute("aria-invalid");
  const summary = document.getElementById("mistakes");
  summary.hidden = true;
  summary.replaceChildren();
}

/** Take away the sentence beside a field that is being changed. @param {EventTarget|null} target */
export function forgive(target) {
  if (!(target instanceof HTMLElement) || !target.hasAttribute("aria-invalid")) return;
  target.removeAttribute("aria-invalid");
  const place = document.getElementById(`${target.id}-mistake`);
  if (place) place.hidden = true;
}

/**
 * The field of a pointer: its own, that of the nearest place around it, or the first one inside.
 * @param {string} pointer @param {Map<string, string>} places @returns {HTMLElement|null}
 */
function fieldOf(pointer, places) {
  for (let here = pointer; here.length > 1; here = here.slice(0, here.lastIndexOf("/"))) {
    const element = document.getElementById(places.get(here) ?? "");
    if (element) return element;
    const inside = [...places.keys()].find((other) => other.startsWith(`${here}/`));
    const first = here === pointer && inside && document.getElementById(places.get(inside));
    if (first) return first;
  }
  return null;
}

/**
 * Show failures. The summary takes the focus, since it says what to do next.
 * @param {import("./calls.js").Failure[]} failures
 * @param {Map<string, string>} places field ids by pointer
 */
export function showMistakes(failures, places) {
  const seen = new Set();
  const entries = [];
  for (const { pointer, detail } of failures.flatMap((failure) => failure.mistakes)) {
    const input = fieldOf(pointer, places);
    const key = `${input?.id} ${detail}`;
    if (seen.has(key)) continue;
    seen.add(key);
    entries.push(entryOf(input, pointer, detail));
  }
  const titles = new Map(failures.map((failure) => [failure.title, failure]));
  const heads = [...titles.values()].map((failure) =>
    make("div", {},
      make("h2", {}, failure.title),
      // Where fields are named below, the sentence would only repeat them.
      failure.mistakes.length ? null : make("p", {}, failure.message)),
  );
  const summary = document.getElementById("mistakes");
  summary.replaceChildren(...heads, entries.length ? make("ul", {}, entries) : "");
  summary.hidden = false;
  summary.focus();
}

function entryOf(input, pointer, detail) {
  const place = input && document.getElementById(`${input.id}-mistake`);
  if (!input || !place) return make("li", {}, make("code", {}, pointer), " ", detail);
  place.textContent = place.textContent ? `${place.textContent} ${detail}` : detail;
  place.hidden = false;
  if (input.matches("input, select, textarea")) input.setAttribute("aria-invalid", "true");
  for (let around = input.closest("details"); around; around = around.parentElement.closest("details")) {
    around.open = true;
  }
  const label = labelOf(input);
  const follow = (event) => {
    event.preventDefault();
    input.focus();
    input.scrollIntoView({ block: "center" });
  };
  return make("li", {}, make("a", { href: `#${input.id}`, onclick: follow }, label), ": ", detail);
}

/** What a field, a group or a button is called. */
function labelOf(input) {
  const named = document.querySelector(`label[for="${input.id}"]`) ?? input.querySelector("legend") ?? (input.matches("button") ? input : null);
  return named?.textContent ?? input.getAttribute("aria-label") ?? input.id;
}
