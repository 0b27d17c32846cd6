/**
 * What a person has typed, as plain data, and the requests it makes.
 *
 * A draft keeps texts as they were typed; the service alone judges them. While a request is written, each
 * place in it is noted with the field it came from, so that an answer about `#/problem/body/size/x` finds it.
 */

import { bodyDraftOf, bodyOf, facesOf } from "./body_draft.js";
import { faceDraftOf, faceOf, padsOf, patchesOf } from "./faces_draft.js";
import { gridsOf } from "./grid_draft.js";
import { entry, idOf, quantity, text } from "./typed.js";
import { AXES, FACES, PHYSICS } from "./words.js";

/** Matrices of more pads than these are left to programs. */
const MOST_PADS_IN_MATRIX = 100;

const emptyTexts = () => ({ x: "", y: "", z: "" });

/** A draft that makes a problem again. @param {any} problem @param {any} view */
export function draftOf(problem, view) {
  const { plane = {} } = view;
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
  };
}

/**
 * The requests of a draft and which field each of their places comes from; null for what has nothing to ask.
 * @returns {{fields: any, flows: any, pads: any, resistances: any, reach: any, places: Map<string, string>}}
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
  return {
    fields: { problem, evaluate: { grids: gridsOf(draft, plane, note), extremes: true }, accuracy },
    flows: { problem, evaluate: flows, accuracy },
    pads: pads ? { problem, accuracy } : null,
    resistances: pads && pads <= MOST_PADS_IN_MATRIX ? { problem, accuracy } : null,
    reach: facesOf(draft).includes(draft.reach.face) ? { problem, evaluate: { ...draft.reach }, accuracy } : null,
    places,
  };
}

/** Nothing for the usual one, which the service chooses by what kind of body it is. */
function accuracyOf({ kind, absolute }) {
  if (kind === "usual") return undefined;
  return kind === "absolute" ? { absolute: entry(absolute) } : { relative: Number(kind) };
}

function problemOf(draft, note) {
  const units = Object.fromEntries(
    Object.entries(draft.units).map(([kind, unit]) => [kind, unit.trim()]).filter(([, unit]) => unit),
  );
  for (const kind of Object.keys(draft.units)) note(`#/problem/units/${kind}`, idOf("unit", kind));
  note("#/problem/name", "name");
  const problem = {
    potential: draft.potential,
    units,
    body: bodyOf(draft, note),
    faces: Object.fromEntries(facesOf(draft).map((face) => [face, faceOf(face, draft, note)])),
  };
  note("#/problem/faces", "faces");
  note("#/problem", "name");
  if (draft.sources.length) {
    problem.sources = draft.sources.map((source, index) => sourceOf(source, index, note));
  }
  return draft.name.trim() ? { name: draft.name.trim(), ...problem } : problem;
}

function sourceOf(source, index, note) {
  const pointer = `#/problem/sources/${index}`;
  const id = idOf("source", index);
  note(pointer, idOf(id, "density"));
  note(`${pointer}/density`, idOf(id, "density"));
  const written = {};
  AXES.forEach((axis, side) => {
    const isLeftOut = source.whole || (!source.from[side].trim() && !source.to[side].trim());
    if (!isLeftOut) written[axis] = [entry(source.from[side]), entry(source.to[side])];
    note(`${pointer}/${axis}`, idOf(id, axis, "from"));
    note(`${pointer}/${axis}/0`, idOf(id, axis, "from"));
    note(`${pointer}/${axis}/1`, idOf(id, axis, "to"));
  });
  written.density = quantity(source.density);
  if (source.name.trim()) written.name = source.name.trim();
  return written;
}
