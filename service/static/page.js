/** The page: keeps what is typed, asks the service, and shows what comes back. */

import { addressOf, ask, Failure } from "./calls.js";
import { draftOf, requestsOf } from "./draft.js";
import { make, showUnits } from "./elements.js";
import { EXAMPLES } from "./examples.js";
import { showPlaces } from "./faces_form.js";
import { drawForm } from "./form.js";
import { clearMistakes, forgive, showMistakes } from "./mistakes.js";
import { plotting } from "./picture.js";
import { redrawPicture, savePictureShown, saveValuesShown, showAnswer } from "./results.js";
import { drawSketch } from "./sketch.js";
import { differenceUnit, inverseOf } from "./words.js";

const part = (name) => document.getElementById(name);
const CALLS = { fields: "/v1/fields", flows: "/v1/flux-totals", pads: "/v1/pads", resistances: "/v1/resistances", reach: "/v1/reach" };
/** Drafts of another shape are not read. */
const KEPT_AS = "stillfield draft 3";

let draft = kept() ?? exampleDraft(0);
/** The request under way. @type {AbortController|null} */
let running = null;
let ticking = 0;

function exampleDraft(index) {
  const { problem, view } = EXAMPLES[index];
  return draftOf(problem, view);
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
}

/** Everything in the form that follows from what is typed elsewhere in it. */
function labelForm() {
  const difference = differenceUnit(draft);
  showUnits({
    ...draft.units, difference, per_difference: inverseOf(difference), contact_resistance: inverseOf(draft.units.film_coefficient),
  });
  showPlaces(draft);
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
  part("request-address").textContent = `POST ${addressOf(CALLS[select.value])}`;
  part("request-text").textContent = readable(requests[select.value]);
}

/** JSON with lists of plain values on one line each; a line break inside a text is never a plain one. */
const readable = (request) => JSON.stringify(request, null, 2)
  .replace(/\[\n\s*([^[\]{}]*?)\n\s*\]/g, (_, list) => `[${list.replace(/\n\s*/g, " ")}]`);

function say(sentence) {
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

/** Ask for the field and the flows. A press while another is under way takes its place. */
async function compute() {
  running?.abort();
  const controller = new AbortController();
  running = controller;
  clearMistakes();
  setBusy(true);
  say("Computing.");
  // Meanwhile the picture's script may come; if it fails, the picture says so.
  plotting().catch(() => {});
  const requests = requestsOf(draft);
  const { places } = requests;
  const { axis } = draft.plane;
  const outcomes = await Promise.allSettled(
    Object.entries(CALLS).map(([name, path]) => (requests[name] ? ask(path, requests[name], controller.signal) : null)),
  );
  if (running !== controller) return;
  running = null;
  setBusy(false);
  // A body may have a field and yet no resistances or no reach of a face; that is told in their place.
  const failures = outcomes.slice(0, 3).flatMap((outcome) => (outcome.status === "rejected" ? [outcome.reason] : []));
  if (failures.length) {
    const known = failures.map((failure) => (failure instanceof Failure ? failure : new Failure("Something failed in this page", "Load it again; what you have typed is kept.")));
    showMistakes(known, places);
    say(`Not computed: ${known[0].title}.`);
    return;
  }
  const [fields, flows, pads, resistances, reach] = outcomes.map((outcome) => outcome.value ?? outcome.reason);
  part("stale").hidden = true;
  await showAnswer({
    fields, flows, pads, resistances, reach, askedResistances: requests.resistances, problem: requests.fields.problem,
    evaluate: requests.flows.evaluate, axis,
  });
  say("Computed. The answer is shown.");
  bringIntoView();
}

/** On a narrow page the answer is below the form; go there, and let readers go on from its heading. */
function bringIntoView() {
  const heading = part("answer-title");
  heading.focus({ preventScroll: true });
  const { top } = heading.getBoundingClientRect();
  if (top < 0 || top > window.innerHeight * 0.6) heading.scrollIntoView({ block: "start" });
}

function cancel() {
  running?.abort();
  running = null;
  setBusy(false);
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
  running?.abort();
  running = null;
  setBusy(false);
  clearMistakes();
  draft = next;
  drawForm(draft, changed, labelForm);
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
  part("load-example").addEventListener("click", () => {
    startFrom(exampleDraft(Number(part("example").value)));
    say("Example loaded; nothing is computed yet.");
  });
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
