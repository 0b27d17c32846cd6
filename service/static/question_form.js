/** The part of the form for a question about numbers: which, the numbers it varies, and its own fields. */

import * as best from "./best_form.js";
import * as calibration from "./calibration_form.js";
import * as cases from "./cases_form.js";
import { button, choice, make } from "./elements.js";
import { numberFields } from "./number_form.js";
import * as sizing from "./sizing_form.js";
import * as tolerances from "./tolerances_form.js";

/** Questions whose numbers need no more than to be chosen. */
const plain = { mostNumbers: () => 100, fieldsOfNumber: () => () => [], ownFields: () => [] };

/** By the last part of each call's address: what it is called, and what it tells. */
export const QUESTIONS = {
  cases: { ...cases, title: "Results of many cases", hint: "All results for many values of some numbers." },
  sensitivities: { ...plain, title: "What matters: sensitivities", hint: "By how much each result changes with each number, and which matter most." },
  tolerances: { ...tolerances, title: "What tolerances add up to", hint: "How far each result may lie: at worst, as a root sum of squares, and sampled, with how often limits hold." },
  sizing: { ...sizing, title: "Size one number", hint: "All values of a number for which every limit holds, also where it and further numbers are off." },
  "best-values": { ...best, title: "Best values of a few numbers", hint: "Values with which results are as low or high as can be and all limits hold." },
  calibration: { ...calibration, title: "Calibrate from readings", hint: "What readings say about numbers that are not known." },
};

/**
 * @param {any} draft @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 * @param {{now: () => void, study: () => void}} ask what the buttons do
 */
export function questionFields(draft, changed, redraw, ask) {
  const { question } = draft;
  const again = (focus) => {
    changed();
    redraw("decision");
    document.getElementById(focus)?.focus();
  };
  const which = choice({
    id: "question", label: "Question", value: question.call, extraClass: "whole",
    options: [["", "none"], ...Object.entries(QUESTIONS).map(([key, { title }]) => [key, title])],
    onChange: (value) => {
      question.call = value;
      again("question");
    },
  });
  if (!question.call) return [which];
  const kind = QUESTIONS[question.call];
  return [
    which, make("p", { class: "hint whole" }, kind.hint),
    ...numberFields(draft, changed, redraw, { mostNumbers: kind.mostNumbers(draft), fieldsOfNumber: kind.fieldsOfNumber(draft) }),
    ...kind.ownFields(draft, changed, again, redraw),
    make("div", { class: "tools whole" },
      button({ id: "ask-now", onclick: ask.now }, "Answer now"),
      button({ id: "ask-study", onclick: ask.study }, "Answer as a study")),
    make("p", { class: "hint whole" }, "What would take too long to wait for is handed in as a study. A study goes on by itself and is still there when this page is opened again."),
  ];
}
