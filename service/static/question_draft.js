/** What is asked beside the field: which question, the numbers it varies, and what it has of its own. */

import * as best from "./best_draft.js";
import * as calibration from "./calibration_draft.js";
import * as cases from "./cases_draft.js";
import { numberDraftsOf } from "./number_draft.js";
import * as sensitivities from "./sensitivities_draft.js";
import * as sizing from "./sizing_draft.js";
import * as tolerances from "./tolerances_draft.js";

/** By the last part of each call's address. */
const QUESTIONS = { cases, sensitivities, tolerances, sizing, "best-values": best, calibration };

/**
 * @param {string} call name of a call, or nothing @param {any} asked its request, or nothing
 * @param {any} problem @param {import("./result_draft.js").ResultDraft[]} results
 */
export function questionDraftOf(call, asked, problem, results) {
  const isAsked = call in QUESTIONS;
  // Beside a number that is sized come those that may be off.
  const references = [asked.numbers ?? asked.number ?? asked.unknowns ?? [], asked.tolerances ?? []].flat();
  return {
    call: isAsked ? call : "",
    numbers: isAsked ? numberDraftsOf(references, problem, asked.results, (reference) => QUESTIONS[call].textsOf(reference, references.indexOf(reference), asked)) : [],
    own: Object.fromEntries(Object.entries(QUESTIONS).map(([name, { ownOf }]) => [name, ownOf(name === call ? asked : {}, results)])),
  };
}

/** The question's part of a request, each place of which is noted with its field. @param {any[]} limits of the request @param {any} problem of it */
export function questionOf(draft, limits, note, problem) {
  note("#/numbers", "numbers");
  return QUESTIONS[draft.question.call].requestOf(draft, limits, note, problem);
}
