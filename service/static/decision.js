/** Asks a question while one waits, and shows its answer. */

import { ask } from "./calls.js";
import { answerView, casesBeside } from "./decision_view.js";
import { make } from "./elements.js";
import { QUESTIONS } from "./question_form.js";
import { bringIntoView, say, tellFailures, waitFor } from "./waiting.js";

const part = (name) => document.getElementById(name);

/**
 * @param {string} call name of the call @param {any} request @param {Map<string, string>} places field ids by pointer
 * @param {() => void} handIn what is done with a question that takes too long to wait for
 */
export async function decide(call, request, places, handIn) {
  const outcomes = await waitFor("Working on the question.", (signal) => [ask(`/v1/${call}`, request, signal).then((answer) => withCases(call, request, answer, signal))]);
  if (!outcomes) return;
  const [{ value, reason }] = outcomes;
  if (reason?.code === "too-costly") {
    handIn();
    return;
  }
  if (!value) {
    tellFailures([reason], places);
    return;
  }
  showDecision(call, request, value.answer, value.cases);
  say("Answered. The answer is shown.");
  bringIntoView(part("decision-title"));
}

/** An answer, with the cases its picture wants; without them there is no picture. */
export async function withCases(call, request, answer, signal) {
  let cases = null;
  for (const beside of casesBeside(call, request, answer)) cases ??= await ask("/v1/cases", beside, signal).catch(() => null);
  return { answer, cases };
}

/** @param {string} call @param {any} request @param {any} answer @param {any} cases */
export function showDecision(call, request, answer, cases) {
  part("nothing-yet").hidden = true;
  part("decision").hidden = false;
  part("decision-stale").hidden = true;
  part("decision-title").textContent = QUESTIONS[call].title;
  part("decision-of").textContent = request.problem.name ?? "Problem without a name";
  part("decision-answer").replaceChildren(make("div", { class: "sheet" }, answerView(call, answer, request, cases)));
}

/** The form has changed since. */
export function outdateDecision() {
  part("decision-stale").hidden = part("decision").hidden;
}
