/**
 * What a person has typed, as plain data, and the requests it makes.
 *
 * A draft keeps texts as they were typed; the service alone judges them. While a request is written, each
 * place in it is noted with the field it came from, so that an answer about `#/problem/body/size/x` finds it.
 */

import { bodyDraftOf, facesOf } from "./body_draft.js";
import { faceDraftOf, padsOf, patchesOf } from "./faces_draft.js";
import { gridsOf } from "./grid_draft.js";
import { limitDraftsOf, limitsOf } from "./limit_draft.js";
import { problemOf } from "./problem_draft.js";
import { questionDraftOf, questionOf } from "./question_draft.js";
import { resultDraftsOf, resultsOf } from "./result_draft.js";
import { entry, quantity, text } from "./typed.js";
import { AXES, FACES, PHYSICS } from "./words.js";

/** Matrices of more pads than these are left to programs. */
const MOST_PADS_IN_MATRIX = 100;

const emptyTexts = () => ({ x: "", y: "", z: "" });

/**
 * A draft that makes a problem again.
 * @param {any} problem @param {any} view @param {any} [asked] request of a decision: results, limits, numbers
 * @param {string} [call] name of its call
 */
export function draftOf(problem, view, asked = {}, call = "") {
  const { plane = {} } = view;
  const results = resultDraftsOf(asked.results ?? [], problem);
  return {
    name: text(problem.name),
    potential: problem.potential,
    units: { length: "m", ...PHYSICS[problem.potential].units, ...problem.units },
    ...bodyDraftOf(problem.body),
    faces: Object.fromEntries(FACES.map((face) => [face, faceDraftOf(face, problem.faces[face])])),
    sources: (problem.sources ?? []).map((source) => ({
      whole: !source.x && !source.y && !source.z,
      from: AXES.map((axis) => text(source[axis]?.[0])),
      to: AXES.map((axis) => text(source[axis]?.[1])),
      density: text(source.density),
      name: text(source.name),
    })),
    plane: {
      axis: "z", position: "", count: "81", ...plane,
      from: { ...emptyTexts(), ...plane.from }, to: { ...emptyTexts(), ...plane.to },
    },
    accuracy: { kind: "usual", absolute: "", ...view.accuracy },
    edgeGap: text(view.edgeGap),
    reach: { face: "", change: "as_given", ...view.reach },
    results,
    limits: limitDraftsOf(asked.limits ?? [], results),
    question: questionDraftOf(call, asked, problem, results),
  };
}

/**
 * The requests of a draft and which field each of their places comes from; null for what has nothing to ask.
 * @returns {{fields: any, flows: any, pads: any, resistances: any, reach: any, limits: any, decision: any, places: Map<string, string>}}
 */
export function requestsOf(draft) {
  const places = new Map();
  const note = (pointer, id) => places.set(pointer, id);
  const problem = problemOf(draft, note);
  const accuracy = accuracyOf(draft.accuracy);
  note("#/accuracy", draft.accuracy.kind === "absolute" ? "accuracy-absolute" : "accuracy-kind");

  const { axis, position } = draft.plane;
  const plane = { name: "plane shown", [axis]: quantity(position) };
  note("#/evaluate", "plane-position");
  const flows = { planes: [plane], patches: patchesOf(draft).map(({ face, patch }) => ({ face, patch })) };
  note("#/evaluate/planes/0", "plane-position");
  patchesOf(draft).forEach(({ id }, index) => note(`#/evaluate/patches/${index}`, id));
  if (draft.edgeGap.trim()) flows.edge_gap = quantity(draft.edgeGap);
  note("#/evaluate/edge_gap", "edge-gap");
  const pads = padsOf(draft).length;
  const results = resultsOf(draft, note);
  const limits = limitsOf(draft, note);
  return {
    fields: { problem, evaluate: { grids: gridsOf(draft, plane, note), extremes: true }, accuracy },
    flows: { problem, evaluate: flows, accuracy },
    pads: pads ? { problem, accuracy } : null,
    resistances: pads && pads <= MOST_PADS_IN_MATRIX ? { problem, accuracy } : null,
    reach: facesOf(draft).includes(draft.reach.face) ? { problem, evaluate: { ...draft.reach }, accuracy } : null,
    limits: results.length || limits.length ? { problem, results, limits, accuracy } : null,
    decision: draft.question.call ? { problem, results, ...questionOf(draft, limits, note, problem), accuracy } : null,
    places,
  };
}

/** Nothing for the usual one, which the service chooses by what kind of body it is. */
function accuracyOf({ kind, absolute }) {
  if (kind === "usual") return undefined;
  return kind === "absolute" ? { absolute: entry(absolute) } : { relative: Number(kind) };
}
