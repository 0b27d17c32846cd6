/**
 * Every number of a request that may be varied, by a plain name. The page makes the pointers (RFC 6901) to them; nobody
 * has to type one.
 */

import { faceWords } from "./regions.js";
import { AXES, axesAcross, axisOf, PHYSICS } from "./words.js";

/**
 * @typedef {object} Entry
 * @property {string} key the way and the pointers, which no two entries share
 * @property {"at"|"shift"|"scale"} way
 * @property {string[]} pointers
 * @property {string} group heading it stands under
 * @property {string} label what it is called there
 * @property {string} name what it is called by itself
 * @property {string} kind of its unit, as in showUnits; nothing for a plain number
 * @property {number|string|null} given as it is typed; null for what moves or multiplies others
 */

/** Words that stand in place of a number. */
const WORDS = ["begin", "end", "low", "middle", "high", "semi-infinite", "infinite"];
const isNumber = (given) => given !== undefined && given !== "" && typeof given !== "object" && !WORDS.includes(given);

/** The datum of each condition, and what it measures. */
const DATA = { held: ["value", "potential"], flux: ["inflow", "flux"], film: ["ambient", "potential"] };

/** @param {any} problem @param {any[]} results both as a request has them @returns {Entry[]} */
export function catalogueOf(problem, results) {
  const entries = [];
  const words = PHYSICS[problem.potential];
  const add = (group, way, pointers, label, kind, given = null, name = label) =>
    entries.push({ key: `${way} ${pointers.join(" ")}`, way, pointers, group, label, name, kind, given });
  const list = {
    at: (group, pointer, label, kind, given, name) => isNumber(given) && add(group, "at", [pointer], label, kind, given, name),
    scale: (group, pointers, label, name) => add(group, "scale", [pointers].flat(), label, "", null, name),
    shift: (group, pointers, label, kind, name) => add(group, "shift", pointers, label, kind, null, name),
  };
  ofBody(problem.body, words, list);
  for (const [face, known] of Object.entries(problem.faces)) ofFace(face, known, words, list);
  (problem.sources ?? []).forEach((source, index) => ofSource(source, index, words, list));
  results.forEach((result, index) => ofResult(result, index, list));
  return entries;
}

/** Patches, pads and boxes of sources, which may be kept apart: pointer and name. @returns {[string, string][]} */
export function rectanglesOf(problem) {
  const ofFaces = Object.entries(problem.faces).flatMap(([face, known]) => {
    const key = known.condition === "mixed" ? "pads" : DATA[known.condition]?.[0];
    const [rectangles, place] = key === "pads" ? [known.pads, "pads"] : [known[key]?.patches ?? [], `${key}/patches`];
    return rectangles.map(({ name }, index) => [`/problem/faces/${face}/${place}/${index}`, `${name ?? `patch ${index + 1}`} (${faceWords(face)})`]);
  });
  const boxes = (problem.sources ?? []).flatMap((source, index) => (AXES.some((axis) => source[axis]) ? [[`/problem/sources/${index}`, source.name ?? `source ${index + 1}`]] : []));
  return [...ofFaces, ...boxes];
}

function ofBody(body, words, list) {
  const conductivity = words.conductivity.toLowerCase();
  for (const axis of AXES) list.at("Body", `/problem/body/size/${axis}`, `length along ${axis}`, "length", body.size[axis]);
  const k = body.conductivity;
  list.at("Body", "/problem/body/conductivity", conductivity, "conductivity", k);
  if (typeof k === "object") {
    for (const axis of AXES) list.at("Body", `/problem/body/conductivity/${axis}`, `${conductivity} along ${axis}`, "conductivity", k[axis]);
    list.scale("Body", "/problem/body/conductivity", `factor on the ${conductivity} along all axes`);
  }
  list.at("Body", "/problem/body/far_level", `${words.potential.toLowerCase()} far away`, "potential", body.far_level);
  list.at("Body", "/problem/body/conductivity_law/per_degree", "part of the conductivity gained per unit", "per_difference", body.conductivity_law?.per_degree);
  if (body.conductivity_law?.conductivity) list.scale("Body", "/problem/body/conductivity_law/conductivity", `factor on the table of the ${conductivity}`);
  (body.layers ?? []).forEach((layer, index) => ofLayer(layer, index, words, list));
}

function ofLayer(layer, index, words, list) {
  const name = layer.name ?? `layer ${index}`;
  const here = `/problem/body/layers/${index}`;
  const at = (key, label, kind, given) => list.at(`Layer ${name}`, `${here}/${key}`, `${label} of ${name}`, kind, given);
  const conductivity = words.conductivity.toLowerCase();
  at("thickness", "thickness", "length", layer.thickness);
  at("conductivity", conductivity, "conductivity", layer.conductivity);
  if (typeof layer.conductivity === "object") {
    at("conductivity/in_plane", `${conductivity} in the plane`, "conductivity", layer.conductivity.in_plane);
    at("conductivity/through", `${conductivity} through`, "conductivity", layer.conductivity.through);
    list.scale(`Layer ${name}`, `${here}/conductivity`, `factor on both conductivities of ${name}`);
  }
  list.at(`Layer ${name}`, `${here}/contact_conductance_below`, `contact conductance below ${name}`, "film_coefficient", layer.contact_conductance_below);
  list.at(`Layer ${name}`, `${here}/contact_resistance_below`, `contact resistance below ${name}`, "contact_resistance", layer.contact_resistance_below);
  at("generation", words.density.toLowerCase(), "density", layer.generation);
}

function ofFace(face, known, words, list) {
  const group = `Face ${faceWords(face)}`;
  const here = `/problem/faces/${face}`;
  const of = `face ${faceWords(face)}`;
  if (known.condition === "mixed") {
    ofMixture(face, known, here, group, words, list);
    return;
  }
  if (known.condition === "insulated") return;
  coefficient(group, `${here}/coefficient`, known.coefficient, `of ${of}`, words, list);
  list.at(group, `${here}/emissivity`, `emissivity of ${of}`, "", known.emissivity);
  const [key, kind] = DATA[known.condition];
  const what = { held: words.potential, flux: words.inflow, film: words.ambient }[known.condition].toLowerCase();
  const given = known[key];
  list.at(group, `${here}/${key}`, `${what} of ${of}`, kind, given);
  // Readings as text have no places to point to.
  if (typeof given !== "object" || given.map === "samples") return;
  list.scale(group, `${here}/${key}`, `factor on all of the ${what} of ${of}`);
  if (given.map !== "patches") return;
  list.at(group, `${here}/${key}/background`, `${what} of ${of} between its patches`, kind, given.background);
  given.patches.forEach((patch, index) => {
    const name = patch.name ?? `patch ${index + 1} of ${of}`;
    const place = `${here}/${key}/patches/${index}`;
    list.at(`Patch ${name}`, `${place}/value`, `${what} of ${name}`, kind, patch.value);
    list.at(`Patch ${name}`, `${place}/flow`, `${words.flow.toLowerCase()} of ${name}`, "flow", patch.flow);
    ofRectangle(face, patch, place, name, `Patch ${name}`, list);
  });
}

function coefficient(group, pointer, given, of, words, list) {
  list.at(group, pointer, `${words.film.toLowerCase()} ${of}`, "film_coefficient", given);
  if (Array.isArray(given)) list.scale(group, pointer, `factor on the ${words.film.toLowerCase()}s ${of}`);
}

function ofMixture(face, { background, pads }, here, group, words, list) {
  const of = `of face ${faceWords(face)} between its pads`;
  coefficient(group, `${here}/background/coefficient`, background.coefficient, of, words, list);
  list.at(group, `${here}/background/ambient`, `${words.ambient.toLowerCase()} ${of}`, "potential", background.ambient);
  list.at(group, `${here}/background/inflow`, `${words.inflow.toLowerCase()} ${of}`, "flux", background.inflow);
  pads.forEach((pad, index) => {
    const name = pad.name ?? `pad ${index + 1} of face ${faceWords(face)}`;
    const place = `${here}/pads/${index}`;
    const at = (key, label, kind) => list.at(`Pad ${name}`, `${place}/${key}`, `${label.toLowerCase()} of ${name}`, kind, pad[key]);
    at("value", words.potential, "potential");
    at("flow", words.flow, "flow");
    at("inflow", words.inflow, "flux");
    at("ambient", words.ambient, "potential");
    coefficient(`Pad ${name}`, `${place}/coefficient`, pad.coefficient, `of ${name}`, words, list);
    ofRectangle(face, pad, place, name, `Pad ${name}`, list);
  });
}

/** A rectangle moves as a whole, or by one edge. */
function ofRectangle(face, rectangle, place, name, group, list) {
  for (const axis of axesAcross(axisOf(face))) {
    const ends = rectangle[axis] ?? [];
    if (ends.length !== 2) continue;
    if (ends.every(isNumber)) list.shift(group, [0, 1].map((end) => `${place}/${axis}/${end}`), `shift of ${name} along ${axis}`, "length");
    ["lower", "upper"].forEach((side, end) => list.at(group, `${place}/${axis}/${end}`, `${side} edge of ${name} along ${axis}`, "length", ends[end]));
  }
}

function ofSource(source, index, words, list) {
  const name = source.name ?? `source ${index + 1}`;
  const here = `/problem/sources/${index}`;
  list.at(`Source ${name}`, `${here}/density`, `${words.density.toLowerCase()} in ${name}`, "density", source.density);
  for (const axis of AXES) {
    if (source[axis]?.every(isNumber)) list.shift(`Source ${name}`, [0, 1].map((end) => `${here}/${axis}/${end}`), `shift of ${name} along ${axis}`, "length");
  }
}

function ofResult(result, index, list) {
  const here = `/results/${index}`;
  const group = "Where results are read";
  (result.at ?? []).forEach((given, side) => list.at(group, `${here}/at/${side}`, `${AXES[side]} of "${result.name}"`, "length", given));
  if (result.result === "flow") {
    for (const axis of AXES) list.at(group, `${here}/${axis}`, `${axis} of "${result.name}"`, "length", result[axis]);
  }
}
