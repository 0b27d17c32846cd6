/** One request at a time: the state of waiting, its seconds, and the way out of it. */

import { Failure } from "./calls.js";
import { clearMistakes, showMistakes } from "./mistakes.js";

const part = (name) => document.getElementById(name);

/** The request under way. @type {AbortController|null} */
let running = null;
let ticking = 0;

/** Tell how things stand. @param {string} sentence */
export function say(sentence) {
  part("status").textContent = sentence;
}

/** Show or end the state of waiting. */
function setBusy(isBusy) {
  clearInterval(ticking);
  document.body.classList.toggle("busy", isBusy);
  part("waiting").hidden = !isBusy;
  part("results").setAttribute("aria-busy", String(isBusy));
  if (!isBusy) return;
  const started = Date.now();
  const tick = () => {
    part("seconds").textContent = `${Math.floor((Date.now() - started) / 1000)} s`;
  };
  tick();
  ticking = setInterval(tick, 1000);
}

/**
 * Ask, and wait for all of it. What is asked while another request is under way takes its place.
 * @template T
 * @param {string} sentence what is being done @param {(signal: AbortSignal) => Promise<T>[]} ask
 * @returns {Promise<PromiseSettledResult<T>[]|null>} null if it was given up
 */
export async function waitFor(sentence, ask) {
  leaveOff();
  const controller = new AbortController();
  running = controller;
  clearMistakes();
  setBusy(true);
  say(sentence);
  const outcomes = await Promise.allSettled(ask(controller.signal));
  if (running !== controller) return null;
  running = null;
  setBusy(false);
  return outcomes;
}

/** Give up what is under way, without a word. */
export function leaveOff() {
  running?.abort();
  running = null;
  setBusy(false);
}

/** Show what went wrong at its fields. @param {any[]} reasons @param {Map<string, string>} places field ids by pointer */
export function tellFailures(reasons, places) {
  const known = reasons.map((reason) => (reason instanceof Failure ? reason : new Failure("Something failed in this page", "Load it again; what you have typed is kept.")));
  showMistakes(known, places);
  say(`Not computed: ${known[0].title}.`);
}

/** On a narrow page the answer is below the form; go there, and let readers go on from its heading. */
export function bringIntoView(heading) {
  heading.focus({ preventScroll: true });
  const { top } = heading.getBoundingClientRect();
  if (top < 0 || top > window.innerHeight * 0.6) heading.scrollIntoView({ block: "start" });
}
