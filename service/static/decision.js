/** Asks a question while one waits, and shows its answer. */

import { ask } from "./calls.js";
import { answerView, casesBeside } from "./decision_view.js";
import { make } from "./elements.js";
import { QUESTIONS } from "./question_form.js";
import { bringIntoView, say, tellFailures, waitFor } from "./waiting.js";

const part = (name) => document.getElementById(name);

/** The decision that is shown, by a number of its own; what comes late for another is dropped. */
let shown = 0;

/**
 * @param {string} call name of the call @param {any} request @param {Map<string, string>} places field ids by pointer
 * @param {() => void} handIn what is done with a question that takes too long to wait for
 */
export async function decide(call, request, places, handIn) {
  const outcomes = await waitFor("Working on the question.", (signal) => [ask(`/v1/${call}`, request, signal)]);
  if (!outcomes) return;
  const [{ value: answer, reason }] = outcomes;
  if (reason?.code === "too-costly") {
    handIn();
    return;
  }
  if (!answer) {
    tellFailures([reason], places);
    return;
  }
  showDecision(call, request, answer);
  say("Answered. The answer is shown.");
  bringIntoView(part("decision-title"));
}

/** Show an answer, and then the picture whose cases are asked for beside it. @param {string} call @param {any} request @param {any} answer */
export function showDecision(call, request, answer) {
  const own = (shown += 1);
  part("nothing-yet").hidden = true;
  part("decision").hidden = false;
  part("decision-stale").hidden = true;
  part("decision-title").textContent = QUESTIONS[call].title;
  part("decision-of").textContent = request.problem.name ?? "Problem without a name";
  const draw = (cases) => part("decision-answer").replaceChildren(make("div", { class: "sheet" }, answerView(call, answer, request, cases)));
  draw(undefined);
  void casesFor(casesBeside(call, request, answer)).then((cases) => {
    if (cases !== undefined && own === shown) draw(cases);
  });
}

/** The first of some requests of cases that does not take too long: undefined where none is wanted, null where none can be had. */
async function casesFor(requests) {
  let cases = requests.length ? null : undefined;
  for (const request of requests) cases ??= await ask("/v1/cases", request, new AbortController().signal).catch(() => null);
  return cases;
}

/** The form has changed since. */
export function outdateDecision() {
  part("decision-stale").hidden = part("decision").hidden;
}
