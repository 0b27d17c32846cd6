/** Fills the answer side of the page: picture, extremes, flows, certificate, warnings. */

import { bodySentence, certificateView, extremesView, warningsView } from "./answer.js";
import { saveText } from "./calls.js";
import { make, scrolled, verdict } from "./elements.js";
import { flowsView } from "./flows.js";
import { limitsView } from "./limit_view.js";
import { bounded, brief, pretty } from "./numbers.js";
import { drawPicture, hasEqualAxes, levelsOf, marksOf, savePicture } from "./picture.js";
import { padsView } from "./pads.js";
import { joined, layersOf, planeOf, planeTable, savePlane } from "./plane.js";
import { reachView } from "./reach.js";
import { resistancesView } from "./resistances.js";
import { PHYSICS } from "./words.js";

const part = (name) => document.getElementById(name);

/**
 * @typedef {object} Outcome
 * @property {any} fields answer of POST /v1/fields
 * @property {any} flows answer of POST /v1/flux-totals
 * @property {any} pads answer of POST /v1/pads, null where there are no pads
 * @property {any} limits answer of POST /v1/limits, or the failure of it, or null where no results are named
 * @property {any} resistances answer of POST /v1/resistances, or the failure of it, or null
 * @property {any} askedResistances its request
 * @property {any} reach answer of POST /v1/reach, or the failure of it, or null
 * @property {any} problem as it was sent
 * @property {any} evaluate what was asked of the flows
 * @property {string} axis the plane shown is square to
 */

/** The picture on the page, to draw again when the width changes. @type {(() => void)|null} */
let redraw = null;
let saveShown = { picture: () => {}, values: () => {} };

export const redrawPicture = () => redraw?.();
export const savePictureShown = () => saveShown.picture();
export const saveValuesShown = () => saveShown.values();

/** @param {Outcome} outcome */
export async function showAnswer({ fields, flows, pads, limits, resistances, reach, askedResistances, problem, evaluate, axis }) {
  const words = PHYSICS[fields.potential];
  const { units } = fields;
  const plane = planeShown(fields, problem, axis);
  const marks = marksOf(plane, fields.extremes, limits?.results ?? [], words);

  part("nothing-yet").hidden = true;
  part("answer").hidden = false;
  part("answer-title").textContent = problem.name ?? "Problem without a name";
  part("answer-body").textContent = bodySentence(problem, units);
  part("answer-id").textContent = fields.problem_id.slice(0, 16);
  part("answer-id").title = fields.problem_id;
  part("picture-heading").textContent = `${words.potential} on the plane ${plane.axis} = ${brief(plane.position)} ${pretty(units.length)}`;
  part("picture-caption").replaceChildren(caption(plane, words, units, marks));
  part("plane-table").replaceChildren(scrolled(planeTable(plane, words, units), "Values behind the picture"));
  part("extremes").replaceChildren(extremesView(fields, words));
  part("flows").replaceChildren(...flowsView(flows, problem, evaluate.edge_gap, words));
  part("certificate").replaceChildren(...certificateView(fields, plane));
  showPads(pads, words);
  showLimits(limits);
  showResistances(resistances, askedResistances, words);
  showReach(reach, problem, words);
  part("warnings").replaceChildren(warningsView([fields, flows, pads, limits, resistances, reach].filter((answer) => answer?.warnings)));

  const sketch = part("sketch").cloneNode(true);
  sketch.removeAttribute("id");
  part("answer-sketch").replaceChildren(sketch);

  const element = part("picture");
  element.setAttribute("aria-label", label(plane, words, units));
  redraw = () => drawPicture(element, plane, words, units, marks).catch(noPicture);
  saveShown = {
    picture: () => savePicture(plane, words, units, marks, problem.name),
    values: () => savePlane(plane, words, units),
  };
  await redraw();
}

/** The plane, or the section through a stack as one plane of many layers. */
function planeShown(fields, problem, axis) {
  const { layers } = problem.body;
  if (!layers || axis === "z") return planeOf(fields, axis);
  const described = layers.map(({ name, contact_conductance_below: conductance, contact_resistance_below: resistance }, index) => ({
    name: name ?? `layer ${index}`, hasContact: (conductance ?? resistance) !== undefined,
  }));
  return joined(layersOf(fields, axis), described);
}

function showPads(pads, words) {
  part("pads-sheet").hidden = !pads;
  if (pads) part("pads").replaceChildren(padsView(pads, words));
}

function showLimits(limits) {
  part("limits-sheet").hidden = !limits;
  if (!limits) return;
  part("limits-heading").textContent = limits.limits?.length === 0 ? "Results" : "Limits";
  part("limits").replaceChildren(...(limits.limits ? limitsView(limits) : [withoutAnswer(limits)]));
}

function showResistances(answer, asked, words) {
  part("resistances-sheet").hidden = !answer;
  if (!answer) return;
  const isAnswer = Boolean(answer.pads);
  part("resistances").replaceChildren(
    ...(isAnswer ? resistancesView(answer, words) : [withoutAnswer(answer)]),
  );
  part("resistances-tools").hidden = !isAnswer;
  part("save-matrix").onclick = () => void saveText("/v1/resistances", asked, "text/csv", "resistances.csv");
  part("save-resistors").onclick = () => void saveText("/v1/resistances", asked, "text/plain", "resistors.txt");
}

/** Why a call beside the field has no answer. @param {import("./calls.js").Failure} failure */
const withoutAnswer = ({ title, message, mistakes }) =>
  verdict("open", title, mistakes.length ? mistakes.map(({ detail }) => detail).join(" ") : message);

function showReach(answer, problem, words) {
  part("reach-sheet").hidden = !answer;
  if (!answer) return;
  part("reach-heading").textContent = answer.reach ? `How far ${answer.reach.face} reaches` : "Reach of a face";
  part("reach").replaceChildren(
    ...(answer.reach ? reachView(answer, problem, words) : [withoutAnswer(answer)]),
  );
}

function noPicture() {
  part("picture").replaceChildren(
    make("p", { class: "hint" }, "The picture could not be drawn. The values are in the table below."),
  );
  part("plane-details").open = true;
}

function label(plane, words, units) {
  return `Heat map with labelled ${words.line}s on the plane ${plane.axis} = ${brief(plane.position)} ${pretty(units.length)}; `
    + `${words.potential.toLowerCase()} from ${brief(plane.lowest)} to ${brief(plane.highest)} ${pretty(units.potential)}. `
    + "The values are in the table that follows.";
}

function caption(plane, words, units, marks) {
  const levels = levelsOf(plane);
  const sentences = [
    `From ${brief(plane.lowest)} to ${brief(plane.highest)} ${pretty(units.potential)}, each value within ${bounded(plane.bound)} ${pretty(units.potential_difference)}.`,
    levels
      ? `One ${words.line} for every ${brief(levels.step)} ${pretty(units.potential_difference)}.`
      : "The plane is uniform within the bound, so no lines are drawn.",
  ];
  if (plane.layers) {
    sentences.push("Layers are not drawn to scale along z, so that thin ones are seen. Firm lines are contacts, dotted ones perfect bonds.");
  } else if (!hasEqualAxes(plane)) sentences.push("The axes are stretched: the plane is too long for equal ones.");
  for (const mark of marks) sentences.push(`${mark.sign} ${mark.words}.`);
  return sentences.join(" ");
}
