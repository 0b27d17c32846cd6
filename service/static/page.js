/** The page: keeps what is typed, asks the service, and shows what comes back. */

import { addressOf, ask } from "./calls.js";
import { decide, outdateDecision } from "./decision.js";
import { draftOf, requestsOf } from "./draft.js";
import { make, showUnits } from "./elements.js";
import { exampleOf, EXAMPLES } from "./examples.js";
import { showPlaces } from "./faces_form.js";
import { drawForm } from "./form.js";
import { refreshLists } from "./lists.js";
import { clearMistakes, forgive } from "./mistakes.js";
import { showNumbers, unitsOfNumbers } from "./number_form.js";
import { plotting } from "./picture.js";
import { unitsOfResult } from "./result_draft.js";
import { showPlainNames } from "./result_form.js";
import { redrawPicture, savePictureShown, saveValuesShown, showAnswer } from "./results.js";
import { drawSketch } from "./sketch.js";
import { begin, offerStudies } from "./study.js";
import { bringIntoView, leaveOff, say, tellFailures, waitFor } from "./waiting.js";
import { differenceUnit, inverseOf } from "./words.js";

const part = (name) => document.getElementById(name);
/** What one press computes; what there is no answer without comes first. */
const CALLS = {
  fields: "/v1/fields", flows: "/v1/flux-totals", pads: "/v1/pads", limits: "/v1/limits", resistances: "/v1/resistances", reach: "/v1/reach",
};
const NEEDED = ["fields", "flows", "pads"];
/** Drafts of another shape are not read. */
const KEPT_AS = "stillfield draft 4";

let draft = kept() ?? draftOf(EXAMPLES[0].problem, EXAMPLES[0].view);

async function loadExample() {
  try {
    const { problem, view, asked, call } = await exampleOf(EXAMPLES[Number(part("example").value)]);
    startFrom(draftOf(problem, view, asked, call));
    say("Example loaded; nothing is computed yet.");
  } catch (failure) {
    say(`Not loaded: ${failure.message}`);
  }
}

/** What was typed before this page was loaded again; browsers may forbid keeping anything. */
function kept() {
  try {
    return JSON.parse(sessionStorage.getItem(KEPT_AS) ?? "null");
  } catch {
    return null;
  }
}

function keep() {
  try {
    sessionStorage.setItem(KEPT_AS, JSON.stringify(draft));
  } catch {
    // Without it only a reload forgets.
  }
}

/** After every change of the draft. */
function changed() {
  keep();
  labelForm();
  sketch();
  showRequest();
  if (!part("answer").hidden) part("stale").hidden = false;
  outdateDecision();
}

/** Everything in the form that follows from what is typed elsewhere in it. */
function labelForm() {
  const difference = differenceUnit(draft);
  const units = {
    ...draft.units, difference, per_difference: inverseOf(difference), contact_resistance: inverseOf(draft.units.film_coefficient),
  };
  const results = Object.fromEntries(draft.results.map(({ id }) => [`result-${id}`, unitsOfResult(draft, id)]));
  showUnits({
    ...units, ...unitsOfNumbers(draft, units),
    ...Object.fromEntries(Object.entries(results).flatMap(([kind, { unit, difference: step }]) => [[kind, unit], [`${kind}-difference`, step]])),
  });
  showPlaces(draft);
  refreshLists();
  showPlainNames(draft);
  showNumbers(draft, units);
}

function sketch() {
  const current = document.activeElement?.closest("[data-face]")?.dataset.face ?? null;
  const isTrue = drawSketch(part("sketch"), draft, current);
  part("sketch-note").textContent = isTrue ? "Drawn in proportion." : "Not in proportion.";
}

function showRequest() {
  const requests = requestsOf(draft);
  const select = part("request-kind");
  for (const option of select.options) option.disabled = !requests[option.value];
  if (!requests[select.value]) select.value = "fields";
  part("request-address").textContent = `POST ${addressOf(CALLS[select.value] ?? `/v1/${draft.question.call}`)}`;
  part("request-text").textContent = readable(requests[select.value]);
}

/** JSON with lists of plain values on one line each; a line break inside a text is never a plain one. */
const readable = (request) => JSON.stringify(request, null, 2)
  .replace(/\[\n\s*([^[\]{}]*?)\n\s*\]/g, (_, list) => `[${list.replace(/\n\s*/g, " ")}]`);

/** Ask for the field, the flows and what else is computed with them. */
async function compute() {
  // Meanwhile the picture's script may come; if it fails, the picture says so.
  plotting().catch(() => {});
  const requests = requestsOf(draft);
  const { axis } = draft.plane;
  const outcomes = await waitFor("Computing.", (signal) =>
    Object.entries(CALLS).map(([name, path]) => (requests[name] ? ask(path, requests[name], signal) : null)));
  if (!outcomes) return;
  // A body may have a field and yet no resistances or no reach of a face; that is told in their place. What is wrong in
  // results and limits as they are typed has to be put right first.
  const reasons = Object.keys(CALLS).flatMap((name, index) => {
    const { reason } = outcomes[index];
    return reason && (NEEDED.includes(name) || (name === "limits" && reason.mistakes?.length)) ? [reason] : [];
  });
  if (reasons.length) {
    tellFailures(reasons, requests.places);
    return;
  }
  const [fields, flows, pads, limits, resistances, reach] = outcomes.map((outcome) => outcome.value ?? outcome.reason);
  part("stale").hidden = true;
  await showAnswer({
    fields, flows, pads, limits, resistances, reach, askedResistances: requests.resistances, problem: requests.fields.problem,
    evaluate: requests.flows.evaluate, axis,
  });
  say("Computed. The answer is shown.");
  bringIntoView(part("answer-title"));
}

/** What the buttons of a question do: ask while one waits, or as a study. */
function asking(how) {
  plotting().catch(() => {});
  const { decision, places } = requestsOf(draft);
  const { call } = draft.question;
  void how(call, decision, places, () => void begin(call, decision, places));
}

function cancel() {
  leaveOff();
  say("Cancelled. What you have typed is kept.");
  part("compute").focus();
}

async function copyRequest() {
  const text = part("request-text").textContent;
  try {
    await navigator.clipboard.writeText(text);
    part("copy-status").textContent = "Copied.";
  } catch {
    // Browsers allow copying by script only on safe addresses.
    getSelection().selectAllChildren(part("request-text"));
    part("copy-status").textContent = "Marked; copy it with Ctrl+C.";
  }
}

function startFrom(next) {
  leaveOff();
  clearMistakes();
  draft = next;
  drawForm(draft, changed, labelForm, { now: () => asking(decide), study: () => asking(begin) });
  changed();
}

function listen() {
  part("form").addEventListener("submit", (event) => {
    event.preventDefault();
    void compute();
  });
  part("form").addEventListener("input", (event) => forgive(event.target));
  part("form").addEventListener("focusin", sketch);
  part("form").addEventListener("focusout", () => setTimeout(sketch));
  part("cancel").addEventListener("click", cancel);
  part("example").append(...EXAMPLES.map(({ title }, index) => make("option", { value: index }, title)));
  part("load-example").addEventListener("click", () => void loadExample());
  part("request-kind").addEventListener("change", showRequest);
  part("copy").addEventListener("click", () => void copyRequest());
  part("save-picture").addEventListener("click", () => void savePictureShown());
  part("save-values").addEventListener("click", () => saveValuesShown());
  part("print").addEventListener("click", () => window.print());
  let waiting = 0;
  let width = window.innerWidth;
  window.addEventListener("resize", () => {
    // On phones the height changes with every bar that comes and goes.
    if (window.innerWidth === width) return;
    width = window.innerWidth;
    clearTimeout(waiting);
    waiting = setTimeout(redrawPicture, 150);
  });
}

listen();
startFrom(draft);
offerStudies();
