/** The answers of questions, each in its own way. */

import { warningsView } from "./answer.js";
import { bestView } from "./best_view.js";
import { calibrationView } from "./calibration_view.js";
import { casesView } from "./cases_view.js";
import { behind } from "./charts.js";
import { make } from "./elements.js";
import { resultsTable } from "./limit_view.js";
import { sensitivitiesView } from "./sensitivities_view.js";
import { curveRequest, sizingView } from "./sizing_view.js";
import { tolerancesView } from "./tolerances_view.js";

/** How each answer is shown; `also` is the request of cases that its picture wants beside it. */
const VIEWS = {
  cases: { view: casesView },
  sensitivities: { view: sensitivitiesView },
  tolerances: { view: tolerancesView },
  sizing: { view: sizingView, also: curveRequest },
  "best-values": { view: bestView },
  calibration: { view: calibrationView },
};

/** The cases that a picture wants beside its answer: requests, the finer one first, should it take too long. @param {string} call @param {any} asked @param {any} answer */
export const casesBeside = (call, asked, answer) => (VIEWS[call].also ? [49, 17].map((count) => VIEWS[call].also(asked, answer, count)) : []);

/** @param {string} call @param {any} answer @param {any} asked its request @param {any} cases of `casesBeside`: undefined until they come, null if they cannot be had */
export const answerView = (call, answer, asked, cases) => [
  ...VIEWS[call].view(answer, asked, cases),
  behind("Results as the problem stands", resultsTable(answer.results, answer.units)),
  answer.warnings.length ? make("div", {}, make("h3", {}, "Warnings"), warningsView([answer])) : null,
].filter(Boolean);
