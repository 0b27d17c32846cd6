/** The body as it is typed: its ends, its material or its layers; and as a request wants it. */

import { lawDraftOf, lawOf } from "./law_draft.js";
import { idOf, quantity, text } from "./typed.js";
import { AXES, axisOf, FACES } from "./words.js";

/**
 * @typedef {object} LayerDraft a layer of a stack, from below
 * @property {string} name
 * @property {string} thickness
 * @property {"same"|"plane"} kind whether it conducts alike in all directions
 * @property {string} all conductivity in all directions
 * @property {string} inPlane
 * @property {string} through
 * @property {"bonded"|"conductance"|"resistance"} contactKind how it is joined to the layer below
 * @property {string} contact contact conductance or resistance below it
 * @property {string} generation
 */

/** @returns {LayerDraft} */
export const emptyLayer = () => ({
  name: "", thickness: "", kind: "same", all: "", inPlane: "", through: "", contactKind: "bonded", contact: "", generation: "",
});

/** The part of a draft that says what the body is. @param {any} body as in a request */
export function bodyDraftOf({ size, conductivity = "", conductivity_law: law, far_level: farLevel, layers = [] }) {
  const isSame = typeof conductivity !== "object";
  const isEndless = (axis) => size[axis] === "semi-infinite" || size[axis] === "infinite";
  return {
    size: Object.fromEntries(AXES.map((axis) => [axis, isEndless(axis) ? "" : text(size[axis])])),
    ends: Object.fromEntries(AXES.map((axis) => [axis, isEndless(axis) ? size[axis] : "finite"])),
    isSame,
    conductivity: {
      all: isSame ? text(conductivity) : "",
      x: text(conductivity.x), y: text(conductivity.y), z: text(conductivity.z),
    },
    law: lawDraftOf(law),
    farLevel: text(farLevel),
    isStack: layers.length > 0,
    layers: layers.map(layerDraftOf),
  };
}

/** @returns {LayerDraft} */
function layerDraftOf({
  name, thickness, conductivity, contact_conductance_below: conductance, contact_resistance_below: resistance, generation,
}) {
  const isSame = typeof conductivity !== "object";
  return {
    name: text(name), thickness: text(thickness), kind: isSame ? "same" : "plane", all: isSame ? text(conductivity) : "",
    inPlane: text(conductivity.in_plane), through: text(conductivity.through), contact: text(conductance ?? resistance),
    contactKind: conductance !== undefined ? "conductance" : resistance !== undefined ? "resistance" : "bonded",
    generation: text(generation),
  };
}

/** How the body ends along an axis; a stack ends along z. @returns {"finite"|"semi-infinite"|"infinite"} */
export const endsOf = (draft, axis) => (axis === "z" && draft.isStack ? "finite" : draft.ends[axis]);

/** Faces the body has: both along an axis that ends, the low one along a semi-infinite one. @returns {import("./words.js").Face[]} */
export const facesOf = (draft) => FACES.filter((face) => {
  const ends = endsOf(draft, axisOf(face));
  return ends === "finite" || (ends === "semi-infinite" && face.endsWith("low"));
});

/** Whether the body goes on without end along any axis. */
export const isOpen = (draft) => AXES.some((axis) => endsOf(draft, axis) !== "finite");

/** Whether the conductivity is told by a table alone. */
export const isTabled = (draft) => !draft.isStack && draft.isSame && draft.law.kind === "conductivities";

/** What a layer is called on the page. */
export const layerName = (layer, index) => layer.name.trim() || `layer ${index}`;

/** The body of a request, each place of which is noted with its field. */
export function bodyOf(draft, note) {
  for (const axis of AXES) {
    note(`#/problem/body/size/${axis}`, endsOf(draft, axis) === "finite" ? idOf("size", axis) : idOf("ends", axis));
  }
  note("#/problem/body/far_level", "far-level");
  const far = isOpen(draft) && draft.farLevel.trim() ? { far_level: quantity(draft.farLevel) } : {};
  const sizeOf = (axis) => (endsOf(draft, axis) === "finite" ? quantity(draft.size[axis]) : draft.ends[axis]);
  if (draft.isStack) {
    note("#/problem/body/layers", "add-layer");
    return { size: { x: sizeOf("x"), y: sizeOf("y") }, ...far, layers: draft.layers.map((layer, index) => layerOf(layer, index, note)) };
  }
  const k = draft.conductivity;
  for (const axis of AXES) note(`#/problem/body/conductivity/${axis}`, idOf("conductivity", axis));
  note("#/problem/body/conductivity", idOf("conductivity", draft.isSame ? "all" : "x"));
  const given = draft.isSame ? quantity(k.all) : { x: quantity(k.x), y: quantity(k.y), z: quantity(k.z) };
  const law = lawOf(draft.law, note);
  return {
    size: { x: sizeOf("x"), y: sizeOf("y"), z: sizeOf("z") },
    ...(isTabled(draft) ? {} : { conductivity: given }), ...(law ? { conductivity_law: law } : {}), ...far,
  };
}

function layerOf(layer, index, note) {
  const pointer = `#/problem/body/layers/${index}`;
  const id = idOf("layer", index);
  note(pointer, idOf(id, "thickness"));
  note(`${pointer}/name`, idOf(id, "name"));
  note(`${pointer}/thickness`, idOf(id, "thickness"));
  note(`${pointer}/conductivity`, idOf(id, layer.kind === "same" ? "all" : "in-plane"));
  note(`${pointer}/conductivity/in_plane`, idOf(id, "in-plane"));
  note(`${pointer}/conductivity/through`, idOf(id, "through"));
  for (const kind of ["conductance", "resistance"]) note(`${pointer}/contact_${kind}_below`, idOf(id, "contact"));
  note(`${pointer}/generation`, idOf(id, "generation"));
  const written = {
    thickness: quantity(layer.thickness),
    conductivity: layer.kind === "same"
      ? quantity(layer.all)
      : { in_plane: quantity(layer.inPlane), through: quantity(layer.through) },
  };
  if (index && layer.contactKind !== "bonded") written[`contact_${layer.contactKind}_below`] = quantity(layer.contact);
  if (layer.generation.trim()) written.generation = quantity(layer.generation);
  return layer.name.trim() ? { name: layer.name.trim(), ...written } : written;
}
