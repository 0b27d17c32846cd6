/**
 * What a person has typed, as plain data, and the requests it makes.
 *
 * A draft keeps texts as they were typed; the service alone judges them. While a request is written, each
 * place in it is noted with the field it came from, so that an answer about `#/problem/body/size/x` finds it.
 */

import { axesAcross, axisOf, FACES, PHYSICS } from "./words.js";

/**
 * @typedef {object} Datum what is known over a face
 * @property {"uniform"|"patches"|"samples"} kind
 * @property {string} value uniform value, or the background of patches
 * @property {{name: string, from: string[], to: string[], value: string}[]} patches along the face's two axes
 * @property {string} csv
 * @property {boolean} hold whether readings reach beyond their axes
 * @property {boolean} fill whether missing readings are filled
 */
/** @typedef {{condition: string, coefficient: string, data: Record<"held"|"flux"|"film", Datum>}} FaceDraft */

/** @returns {Datum} */
export const emptyDatum = () => ({
  kind: "uniform", value: "", patches: [], csv: "", hold: false, fill: false,
});

/** @returns {FaceDraft} */
const emptyFace = () => ({
  condition: "insulated",
  coefficient: "",
  data: { held: emptyDatum(), flux: emptyDatum(), film: emptyDatum() },
});

/** The key of the datum of a condition in a request. */
export const DATUM_KEYS = { held: "value", flux: "inflow", film: "ambient" };

const text = (value) => (value === undefined || value === null ? "" : String(value));

/** A draft that makes a problem again. @param {any} problem @param {any} view */
export function draftOf(problem, view) {
  const { size, conductivity } = problem.body;
  const isSame = typeof conductivity !== "object";
  return {
    name: text(problem.name),
    potential: problem.potential,
    units: { length: "m", ...PHYSICS[problem.potential].units, ...problem.units },
    size: { x: text(size.x), y: text(size.y), z: size.z === "semi-infinite" ? "" : text(size.z) },
    isBar: size.z === "semi-infinite",
    isSame,
    conductivity: {
      all: isSame ? text(conductivity) : "",
      x: text(conductivity.x), y: text(conductivity.y), z: text(conductivity.z),
    },
    faces: Object.fromEntries(FACES.map((face) => [face, faceDraftOf(face, problem.faces[face])])),
    sources: (problem.sources ?? []).map((source) => ({
      whole: !source.x && !source.y && !source.z,
      from: ["x", "y", "z"].map((axis) => text(source[axis]?.[0])),
      to: ["x", "y", "z"].map((axis) => text(source[axis]?.[1])),
      density: text(source.density),
      name: text(source.name),
    })),
    plane: { axis: "z", position: "", reach: "", count: "81", ...view.plane },
    accuracy: { kind: "1e-9", absolute: "", ...view.accuracy },
    edgeGap: text(view.edgeGap),
  };
}

function faceDraftOf(face, known) {
  const draft = emptyFace();
  if (!known) return draft;
  draft.condition = known.condition;
  draft.coefficient = text(known.coefficient);
  if (known.condition === "insulated") return draft;
  const datum = draft.data[known.condition];
  const given = known[DATUM_KEYS[known.condition]];
  if (typeof given !== "object") {
    datum.value = text(given);
    return draft;
  }
  datum.kind = given.map;
  datum.value = text(given.background);
  const across = axesAcross(axisOf(face));
  datum.patches = (given.patches ?? []).map((patch) => ({
    name: text(patch.name), value: text(patch.value),
    from: across.map((axis) => text(patch[axis]?.[0])),
    to: across.map((axis) => text(patch[axis]?.[1])),
  }));
  datum.csv = text(given.csv).trim();
  datum.hold = given.beyond === "hold";
  datum.fill = given.fill_missing === "smooth";
  return draft;
}

/** Faces the body has: a bar has no far end. @returns {import("./words.js").Face[]} */
export const facesOf = (draft) => (draft.isBar ? FACES.slice(0, 5) : FACES);

/**
 * A typed text as a request wants it: a bare number as a number, all else as a text with its own unit, and
 * nothing for nothing, of which the service says that it is required.
 * @returns {number|string|undefined}
 */
export function quantity(typed) {
  const trimmed = typed.trim().replace(/^[\u2212\u2013]/, "-");
  if (trimmed === "") return undefined;
  const number = /^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/.test(trimmed) ? Number(trimmed) : NaN;
  return Number.isFinite(number) ? number : trimmed;
}

/** In a list nothing cannot be left out. */
const entry = (typed) => quantity(typed) ?? "";

/** The field of a draft's part; the page's ids are made here alone. */
export const idOf = (...parts) => parts.join("-");

/**
 * The two requests of a draft and which field each of their places comes from.
 * @returns {{fields: any, flows: any, places: Map<string, string>}}
 */
export function requestsOf(draft) {
  const places = new Map();
  const note = (pointer, id) => places.set(pointer, id);
  const problem = problemOf(draft, note);
  const accuracy = draft.accuracy.kind === "absolute"
    ? { absolute: entry(draft.accuracy.absolute) }
    : { relative: Number(draft.accuracy.kind) };
  note("#/accuracy", draft.accuracy.kind === "absolute" ? "accuracy-absolute" : "accuracy-kind");

  const { axis, position } = draft.plane;
  const grid = { name: "plane shown", [axis]: quantity(position) };
  note("#/evaluate", "plane-position");
  note("#/evaluate/grids/0", "plane-position");
  for (const other of axesAcross(axis)) {
    const isOpen = other === "z" && draft.isBar;
    const to = isOpen ? draft.plane.reach : draft.size[other];
    grid[other] = { from: 0, to: quantity(to), count: Number(draft.plane.count) };
    note(`#/evaluate/grids/0/${other}`, isOpen ? "plane-reach" : idOf("size", other));
  }
  const flows = { planes: [{ name: "plane shown", [axis]: quantity(position) }], patches: patchesOf(draft) };
  note("#/evaluate/planes/0", "plane-position");
  flows.patches.forEach(({ face, patch }, index) => {
    const { condition } = draft.faces[face];
    note(`#/evaluate/patches/${index}`, idOf(face, condition, "patch", patch, "value"));
  });
  if (draft.edgeGap.trim()) flows.edge_gap = quantity(draft.edgeGap);
  note("#/evaluate/edge_gap", "edge-gap");
  return {
    fields: { problem, evaluate: { grids: [grid], extremes: true }, accuracy },
    flows: { problem, evaluate: flows, accuracy },
    places,
  };
}

/** Every patch of every face, by its number. */
function patchesOf(draft) {
  return facesOf(draft).flatMap((face) => {
    const { condition, data } = draft.faces[face];
    if (condition === "insulated" || data[condition].kind !== "patches") return [];
    return data[condition].patches.map((_, patch) => ({ face, patch }));
  });
}

function problemOf(draft, note) {
  const units = Object.fromEntries(
    Object.entries(draft.units).map(([kind, unit]) => [kind, unit.trim()]).filter(([, unit]) => unit),
  );
  for (const kind of Object.keys(draft.units)) note(`#/problem/units/${kind}`, idOf("unit", kind));
  note("#/problem/name", "name");
  for (const axis of ["x", "y", "z"]) {
    note(`#/problem/body/size/${axis}`, idOf("size", axis));
    note(`#/problem/body/conductivity/${axis}`, idOf("conductivity", axis));
  }
  note("#/problem/body/conductivity", idOf("conductivity", draft.isSame ? "all" : "x"));
  const { x, y, z } = draft.size;
  const k = draft.conductivity;
  const problem = {
    potential: draft.potential,
    units,
    body: {
      size: { x: quantity(x), y: quantity(y), z: draft.isBar ? "semi-infinite" : quantity(z) },
      conductivity: draft.isSame ? quantity(k.all) : { x: quantity(k.x), y: quantity(k.y), z: quantity(k.z) },
    },
    faces: Object.fromEntries(facesOf(draft).map((face) => [face, faceOf(face, draft.faces[face], note)])),
  };
  note("#/problem/faces", "faces");
  note("#/problem", "name");
  if (draft.sources.length) {
    problem.sources = draft.sources.map((source, index) => sourceOf(source, index, note));
  }
  return draft.name.trim() ? { name: draft.name.trim(), ...problem } : problem;
}

function faceOf(face, draft, note) {
  const { condition } = draft;
  const pointer = `#/problem/faces/${face}`;
  note(pointer, idOf(face, "condition"));
  if (condition === "insulated") return { condition };
  const key = DATUM_KEYS[condition];
  const known = { condition };
  if (condition === "film") {
    known.coefficient = quantity(draft.coefficient);
    note(`${pointer}/coefficient`, idOf(face, "coefficient"));
  }
  known[key] = datumOf(face, condition, draft.data[condition], `${pointer}/${key}`, note);
  return known;
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
  note(pointer, idOf(id, "kind"));
  note(`${pointer}/background`, idOf(id, "value"));
  const across = axesAcross(axisOf(face));
  return {
    map: "patches",
    background: quantity(datum.value),
    patches: datum.patches.map((patch, index) => {
      const here = `${pointer}/patches/${index}`;
      const part = idOf(id, "patch", index);
      // Most often a patch as a whole is wrong in its place.
      note(here, idOf(part, across[0], "from"));
      const written = patch.name.trim() ? { name: patch.name.trim() } : {};
      note(`${here}/name`, idOf(part, "name"));
      across.forEach((axis, side) => {
        written[axis] = [entry(patch.from[side]), entry(patch.to[side])];
        note(`${here}/${axis}`, idOf(part, axis, "from"));
        note(`${here}/${axis}/0`, idOf(part, axis, "from"));
        note(`${here}/${axis}/1`, idOf(part, axis, "to"));
      });
      written.value = quantity(patch.value);
      note(`${here}/value`, idOf(part, "value"));
      return written;
    }),
  };
}

function sourceOf(source, index, note) {
  const pointer = `#/problem/sources/${index}`;
  const id = idOf("source", index);
  note(pointer, idOf(id, "density"));
  note(`${pointer}/density`, idOf(id, "density"));
  const written = {};
  ["x", "y", "z"].forEach((axis, side) => {
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
