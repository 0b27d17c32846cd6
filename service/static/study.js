/** Questions answered as studies: begun, followed, cancelled, saved, and found again when the page is opened again. */

import { ask, askFor } from "./calls.js";
import { casesTable } from "./cases_view.js";
import { showDecision } from "./decision.js";
import { button, make, verdict } from "./elements.js";
import { counted } from "./numbers.js";
import { QUESTIONS } from "./question_form.js";
import { bringIntoView, say, tellFailures, waitFor } from "./waiting.js";

const part = (name) => document.getElementById(name);
const KEPT_AS = "stillfield studies 1";
const MOST_KEPT = 20;
/** So often the table so far is asked for while a study runs. */
const TABLE_EVERY_MILLISECONDS = 2000;
const OVER = ["finished", "cancelled", "failed"];

/** @typedef {{id: string, call: string, request: any}} Kept a study that was begun on this page */

/** The study that is followed. @type {EventSource|null} */
let news = null;
/** @type {Kept|null} */
let followed = null;
let tableShown = 0;

/** @returns {Kept[]} the newest first */
function kept() {
  try {
    return JSON.parse(localStorage.getItem(KEPT_AS) ?? "[]");
  } catch {
    return [];
  }
}

function keep(study) {
  try {
    localStorage.setItem(KEPT_AS, JSON.stringify([study, ...kept().filter(({ id }) => id !== study.id)].slice(0, MOST_KEPT)));
  } catch {
    // Browsers may forbid keeping anything; the study goes on all the same.
  }
}

/** Begin a study. @param {string} call @param {any} request @param {Map<string, string>} places field ids by pointer */
export async function begin(call, request, places) {
  const outcomes = await waitFor("Handing in the study.", (signal) => [ask("/v1/studies", { study: call, question: request }, signal)]);
  if (!outcomes) return;
  const [{ value: study, reason }] = outcomes;
  if (!study) {
    // Pointers of a study go through the question it holds.
    for (const mistake of reason.mistakes ?? []) mistake.pointer = mistake.pointer.replace(/^#\/question/, "#");
    tellFailures([reason], places);
    return;
  }
  const begun = { id: study.study_id, call, request };
  keep(begun);
  say("The study is handed in. It goes on by itself.");
  follow(begun, study);
  bringIntoView(part("study-title"));
}

/** Offer the studies that were begun on this page before. */
export function offerStudies() {
  const studies = kept();
  part("studies").hidden = !studies.length;
  part("studies-list").replaceChildren(...studies.map((study) => make("li", {},
    button({ onclick: () => void open(study) }, `${QUESTIONS[study.call]?.title ?? study.call}: ${study.request.problem.name ?? "problem without a name"}`))));
}

async function open(study) {
  try {
    follow(study, await askFor(`/v1/studies/${study.id}`));
    bringIntoView(part("study-title"));
  } catch (failure) {
    say(`${failure.title ?? "Not opened"}: ${failure.message}`);
  }
}

/** @param {Kept} study @param {any} standing how it stands */
function follow(study, standing) {
  news?.close();
  followed = study;
  tableShown = 0;
  part("nothing-yet").hidden = true;
  part("study").hidden = false;
  part("study-title").textContent = `Study: ${QUESTIONS[study.call].title}`;
  part("study-of").textContent = study.request.problem.name ?? "Problem without a name";
  part("study-table").replaceChildren();
  part("study-cancel").onclick = () => void cancel(study);
  for (const [id, form] of [["study-csv", "csv"], ["study-lines", "jsonl"], ["study-binary", "npz"]]) part(id).href = `/v1/studies/${study.id}/results?format=${form}`;
  offerStudies();
  stands(study, standing);
  if (OVER.includes(standing.state)) return;
  news = new EventSource(`/v1/studies/${study.id}/progress`);
  for (const state of ["waiting", "running", ...OVER]) {
    news.addEventListener(state, (event) => {
      if (followed === study) stands(study, JSON.parse(event.data));
    });
  }
}

/** Show how a study stands. */
function stands(study, standing) {
  const { state, progress, fault } = standing;
  const isOver = OVER.includes(state);
  const bar = part("study-progress");
  bar.hidden = isOver;
  bar.max = Math.max(progress.cases_expected, 1);
  bar.value = progress.cases_done;
  part("study-cancel").hidden = isOver;
  part("study-tools").hidden = !progress.cases_done;
  part("study-state").replaceChildren(stateView(standing));
  if (isOver) {
    news?.close();
    part("study-fault").replaceChildren(...(fault ? [verdict("bad", "The study failed", fault.message)] : []));
    void showTable(study);
    if (state === "finished") void showAnswer(study, standing);
  } else if (progress.cases_done && Date.now() - tableShown > TABLE_EVERY_MILLISECONDS) {
    void showTable(study);
  }
}

function stateView({ state, progress, waits_for_cluster: waits }) {
  const { cases_done: done, cases_failed: failed, cases_expected: expected, seconds_left: left } = progress;
  const failures = failed ? `, ${counted(failed)} without a result` : "";
  if (state === "finished") return verdict("good", "Finished", `${counted(done)} cases${failures}.`);
  if (state === "cancelled") return verdict("open", "Cancelled", `${counted(done)} cases were done${failures}; they are kept.`);
  if (state === "failed") return verdict("bad", "Ended early", `${counted(done)} cases were done${failures}.`);
  const time = left === null ? "" : ` About ${duration(left)} left.`;
  const where = waits ? "Waits for the cluster" : state === "waiting" ? "Waits for its turn" : "Running";
  return verdict("open", where, `${counted(done)} of about ${counted(expected)} cases${failures}.${time}`);
}

function duration(seconds) {
  if (seconds < 90) return `${Math.ceil(seconds)} s`;
  return seconds < 5400 ? `${Math.round(seconds / 60)} min` : `${(seconds / 3600).toFixed(1)} h`;
}

/** The table so far; it stays as it is when it cannot be had. */
async function showTable(study) {
  tableShown = Date.now();
  try {
    const table = await askFor(`/v1/studies/${study.id}/results`);
    if (followed === study && table.case.length) part("study-table").replaceChildren(casesTable(table));
  } catch {
    // The next news asks again.
  }
}

async function showAnswer(study, { answer: address }) {
  try {
    const answer = await askFor(address);
    if (followed !== study) return;
    showDecision(study.call, study.request, answer);
    say("The study is finished. Its answer is shown.");
  } catch (failure) {
    part("study-fault").replaceChildren(verdict("bad", "The answer cannot be shown", failure.message));
  }
}

async function cancel(study) {
  try {
    stands(study, await ask(`/v1/studies/${study.id}/cancel`, undefined, new AbortController().signal));
    say("The study is cancelled. The cases that are done are kept.");
  } catch (failure) {
    say(`${failure.title}: ${failure.message}`);
  }
}
