/** What is known on the faces as it is typed, and as a request wants it. */

import { facesOf } from "./body_draft.js";
import { textOfSamples } from "./samples_text.js";
import { entry, idOf, quantity, text } from "./typed.js";
import { axesAcross, axisOf } from "./words.js";

/**
 * @typedef {object} PatchDraft a rectangle of a face
 * @property {string} name
 * @property {string[]} from along the face's two axes
 * @property {string[]} to
 * @property {string} value
 * @property {boolean} isTotal whether the value is the total flow of the patch
 */
/**
 * @typedef {object} Datum what is known over a face
 * @property {"uniform"|"patches"|"samples"|"formula"} kind
 * @property {string} value uniform value, or the background of patches
 * @property {PatchDraft[]} patches
 * @property {string} csv
 * @property {string} expression of a formula
 * @property {boolean} hold whether readings reach beyond their axes
 * @property {boolean} fill whether missing readings are filled
 */
/**
 * @typedef {object} PadDraft a pad of a face with several conditions
 * @property {string} name
 * @property {string[]} from
 * @property {string[]} to
 * @property {"held"|"flow"|"film"|"inflow"|"spread"} kind held at a value, held with a given flow, behind a film, or
 *   with a given inflow per area or in all
 * @property {string} value potential, flow, surroundings or inflow
 * @property {string} coefficient
 */
/**
 * @typedef {object} Mixture
 * @property {{condition: "insulated"|"flux"|"film", value: string, coefficient: string}} background
 * @property {PadDraft[]} pads
 */
/**
 * @typedef {object} FaceDraft
 * @property {string} condition
 * @property {string} coefficient
 * @property {string} emissivity
 * @property {Record<"held"|"flux"|"film", Datum>} data
 * @property {Mixture} mixture
 */

/** @returns {Datum} */
export const emptyDatum = () => ({ kind: "uniform", value: "", patches: [], csv: "", expression: "", hold: false, fill: false });
/** @returns {PatchDraft} */
export const emptyPatch = () => ({ name: "", from: ["", ""], to: ["", ""], value: "", isTotal: false });
/** @returns {PadDraft} */
export const emptyPad = () => ({ name: "", from: ["", ""], to: ["", ""], kind: "held", value: "", coefficient: "" });

/** @returns {FaceDraft} */
const emptyFace = () => ({
  condition: "insulated",
  coefficient: "",
  emissivity: "",
  data: { held: emptyDatum(), flux: emptyDatum(), film: emptyDatum() },
  mixture: { background: { condition: "insulated", value: "", coefficient: "" }, pads: [] },
});

/** The key of the datum of a condition in a request. */
export const DATUM_KEYS = { held: "value", flux: "inflow", film: "ambient" };

/** Coefficients beside the layers of a stack are typed with semicolons between them. */
const coefficientText = (given) => (Array.isArray(given) ? given.map(text).join("; ") : text(given));
const coefficientOf = (typed) => (typed.includes(";") ? typed.split(";").map(entry) : quantity(typed));

const endsText = (across, owner) => ({
  from: across.map((axis) => text(owner[axis]?.[0])),
  to: across.map((axis) => text(owner[axis]?.[1])),
});

/** @returns {PadDraft["kind"]} */
function padKindOf({ condition, flow }) {
  if (condition === "film") return "film";
  if (condition === "flux") return flow === undefined ? "inflow" : "spread";
  return flow === undefined ? "held" : "flow";
}

/** @returns {FaceDraft} */
export function faceDraftOf(face, known) {
  const draft = emptyFace();
  if (!known) return draft;
  draft.condition = known.condition;
  if (known.condition === "insulated") return draft;
  const across = axesAcross(axisOf(face));
  if (known.condition === "mixed") {
    const { background } = known;
    draft.mixture = {
      background: {
        condition: background.condition, value: text(background.inflow ?? background.ambient),
        coefficient: coefficientText(background.coefficient),
      },
      pads: known.pads.map((pad) => ({
        name: text(pad.name), ...endsText(across, pad),
        kind: padKindOf(pad), value: text(pad.value ?? pad.flow ?? pad.ambient ?? pad.inflow), coefficient: coefficientText(pad.coefficient),
      })),
    };
    return draft;
  }
  draft.coefficient = coefficientText(known.coefficient);
  draft.emissivity = text(known.emissivity);
  const datum = draft.data[known.condition];
  const given = known[DATUM_KEYS[known.condition]];
  if (typeof given !== "object") {
    datum.value = text(given);
    return draft;
  }
  datum.kind = given.map;
  datum.value = text(given.background);
  datum.patches = (given.patches ?? []).map((patch) => ({
    name: text(patch.name), value: text(patch.value ?? patch.flow), isTotal: patch.flow !== undefined,
    ...endsText(across, patch),
  }));
  datum.csv = given.table ? textOfSamples(given, face) : text(given.csv).trim();
  datum.expression = text(given.expression);
  datum.hold = given.beyond === "hold";
  datum.fill = given.fill_missing === "smooth";
  return draft;
}

/** Every patch and pad of every face, by its number, with the field that stands for it and what is typed of it. */
export function patchesOf(draft) {
  return facesOf(draft).flatMap((face) => {
    const { condition, data, mixture } = draft.faces[face];
    const numbered = (rectangles, ...parts) => rectangles.map((rectangle, patch) => (
      { face, patch, rectangle, id: idOf(face, ...parts, patch, "value") }));
    if (condition === "mixed") return numbered(mixture.pads, "pad");
    return condition === "insulated" || data[condition].kind !== "patches" ? [] : numbered(data[condition].patches, condition, "patch");
  });
}

/** The patches whose potentials are asked for: those of faces with a given flow, and pads of mixed faces. */
export const padsOf = (draft) =>
  patchesOf(draft).filter(({ face }) => ["flux", "mixed"].includes(draft.faces[face].condition));

/** Whether film faces may radiate as well: those of a body of one material, at temperatures. */
export const mayRadiate = (draft) => draft.potential === "temperature" && !draft.isStack;

/** A face of a request, each place of which is noted with its field. */
export function faceOf(face, whole, note) {
  const draft = whole.faces[face];
  const { condition } = draft;
  const pointer = `#/problem/faces/${face}`;
  note(pointer, idOf(face, "condition"));
  if (condition === "insulated") return { condition };
  if (condition === "mixed") return mixedOf(face, draft.mixture, pointer, note);
  const key = DATUM_KEYS[condition];
  const known = { condition };
  if (condition === "film") {
    known.coefficient = coefficientOf(draft.coefficient);
    note(`${pointer}/coefficient`, idOf(face, "coefficient"));
    note(`${pointer}/emissivity`, idOf(face, "emissivity"));
  }
  known[key] = datumOf(face, condition, draft.data[condition], `${pointer}/${key}`, note);
  if (condition === "film" && mayRadiate(whole) && draft.emissivity.trim()) known.emissivity = quantity(draft.emissivity);
  return known;
}

function mixedOf(face, { background, pads }, pointer, note) {
  const id = idOf(face, "background");
  note(`${pointer}/background`, idOf(id, "condition"));
  note(`${pointer}/pads`, idOf(face, "add-pad"));
  const written = { condition: background.condition };
  if (background.condition === "flux") written.inflow = quantity(background.value);
  if (background.condition === "film") {
    written.coefficient = coefficientOf(background.coefficient);
    written.ambient = quantity(background.value);
  }
  for (const key of ["inflow", "ambient"]) note(`${pointer}/background/${key}`, idOf(id, "value"));
  note(`${pointer}/background/coefficient`, idOf(id, "coefficient"));
  return { condition: "mixed", background: written, pads: pads.map((pad, index) => padOf(face, pad, index, `${pointer}/pads/${index}`, note)) };
}

function padOf(face, pad, index, here, note) {
  const id = idOf(face, "pad", index);
  const written = placed(face, pad, id, here, note);
  for (const key of ["value", "flow", "ambient", "inflow"]) note(`${here}/${key}`, idOf(id, "value"));
  note(`${here}/coefficient`, idOf(id, "coefficient"));
  const value = quantity(pad.value);
  if (pad.kind === "film") return { ...written, condition: "film", coefficient: coefficientOf(pad.coefficient), ambient: value };
  const [condition, key] = { held: ["held", "value"], flow: ["held", "flow"], inflow: ["flux", "inflow"], spread: ["flux", "flow"] }[pad.kind];
  return { ...written, condition, [key]: value };
}

/** Name and place of a patch or pad. */
function placed(face, owner, id, here, note) {
  const across = axesAcross(axisOf(face));
  // Most often a patch as a whole is wrong in its place.
  note(here, idOf(id, across[0], "from"));
  note(`${here}/name`, idOf(id, "name"));
  const written = owner.name.trim() ? { name: owner.name.trim() } : {};
  across.forEach((axis, side) => {
    written[axis] = [entry(owner.from[side]), entry(owner.to[side])];
    note(`${here}/${axis}`, idOf(id, axis, "from"));
    note(`${here}/${axis}/0`, idOf(id, axis, "from"));
    note(`${here}/${axis}/1`, idOf(id, axis, "to"));
  });
  return written;
}

function datumOf(face, condition, datum, pointer, note) {
  const id = idOf(face, condition);
  if (datum.kind === "uniform") {
    note(pointer, idOf(id, "value"));
    return quantity(datum.value);
  }
  if (datum.kind === "samples") {
    note(pointer, idOf(id, "csv"));
    const map = { map: "samples", csv: `${datum.csv.trim()}\n` };
    if (datum.hold) map.beyond = "hold";
    if (datum.fill) map.fill_missing = "smooth";
    return map;
  }
  if (datum.kind === "formula") {
    note(pointer, idOf(id, "expression"));
    return { map: "formula", expression: datum.expression.trim() };
  }
  note(pointer, idOf(id, "kind"));
  note(`${pointer}/background`, idOf(id, "value"));
  return {
    map: "patches",
    background: quantity(datum.value),
    patches: datum.patches.map((patch, index) => {
      const here = `${pointer}/patches/${index}`;
      const part = idOf(id, "patch", index);
      const written = placed(face, patch, part, here, note);
      const isTotal = condition === "flux" && patch.isTotal;
      for (const key of ["value", "flow"]) note(`${here}/${key}`, idOf(part, "value"));
      return { ...written, [isTotal ? "flow" : "value"]: quantity(patch.value) };
    }),
  };
}
