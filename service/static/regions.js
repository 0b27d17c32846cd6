/** Parts of the body in which a result is looked for, as keys of a choice and as a request wants them. */

import { facesOf, layerName } from "./body_draft.js";
import { patchesOf } from "./faces_draft.js";
import { entry, text } from "./typed.js";
import { AXES, axesAcross, axisOf } from "./words.js";

/** A face as it is spoken of: "x high". */
export const faceWords = (face) => face.replace("_", " ");

/** What a patch or pad is called. @param {{face: string, patch: number, rectangle: any}} numbered of `patchesOf` */
const patchName = ({ face, patch, rectangle }) => rectangle.name.trim() || `patch ${patch + 1} of ${faceWords(face)}`;

/**
 * Parts that are offered.
 * @param {any} draft @param {boolean} isOfFaces whether only faces and their parts are asked for
 * @returns {import("./lists.js").Group[]}
 */
export function regionsOf(draft, isOfFaces) {
  const faces = facesOf(draft);
  const patches = patchesOf(draft);
  const groups = [
    ["Faces", faces.map((face) => [`face ${face}`, `face ${faceWords(face)}`])],
    ["Patches and pads", patches.map((one) => [`patch ${one.face} ${one.patch}`, `${patchName(one)} (${faceWords(one.face)})`])],
    ["Rectangles of your own", faces.map((face) => [`rectangle ${face}`, `rectangle of face ${faceWords(face)}`])],
  ];
  if (!isOfFaces) {
    groups.unshift([null, [["body", "the whole body"], ["box", "a box inside"]]]);
    if (draft.isStack) groups.splice(1, 0, ["Layers", draft.layers.map((layer, index) => [`layer ${index}`, layerName(layer, index)])]);
  }
  return groups.filter(([, entries]) => entries.length);
}

/** Axes along which a part has ends to type. @param {string} region */
export function axesOfRegion(region) {
  const [kind, face] = region.split(" ");
  return kind === "box" ? AXES : kind === "rectangle" ? axesAcross(axisOf(face)) : [];
}

/** A part in a few words. */
export function regionWords(draft, region) {
  const [kind, at, index] = region.split(" ");
  if (kind === "face") return faceWords(at);
  if (kind === "rectangle") return `rectangle of ${faceWords(at)}`;
  if (kind === "layer") return draft.layers[Number(at)] ? layerName(draft.layers[Number(at)], Number(at)) : "layer";
  if (kind === "patch") {
    const found = patchesOf(draft).find(({ face, patch }) => face === at && patch === Number(index));
    return found ? patchName(found) : "patch";
  }
  return kind === "box" ? "box" : "body";
}

/** A part as a request wants it. @param {any} draft @param {any} result with its region, from and to */
export function regionOf(draft, { region, from, to }) {
  const [kind, at, index] = region.split(" ");
  const intervals = Object.fromEntries(axesOfRegion(region).flatMap((axis) => {
    const side = AXES.indexOf(axis);
    return from[side].trim() || to[side].trim() ? [[axis, [entry(from[side]), entry(to[side])]]] : [];
  }));
  if (kind === "box") return { box: intervals };
  if (kind === "layer") return { layer: draft.layers[Number(at)]?.name.trim() || Number(at) };
  if (kind === "face") return { face: at };
  if (kind === "rectangle") return { face: at, ...intervals };
  if (kind === "patch") {
    const found = patchesOf(draft).find(({ face, patch }) => face === at && patch === Number(index));
    return { face: at, patch: found?.rectangle.name.trim() || Number(index) };
  }
  return {};
}

/** The part of a request as it is typed. @param {any} result @param {any} problem both of a request */
export function regionDraftOf(result, problem) {
  const intervals = result.box ?? result;
  const ends = (end) => AXES.map((axis) => text(Array.isArray(intervals[axis]) ? intervals[axis][end] : undefined));
  const texts = { from: ends(0), to: ends(1) };
  if (result.box) return { region: "box", ...texts };
  if (result.layer !== undefined) return { region: `layer ${numberOf(result.layer, problem.body.layers)}`, ...texts };
  if (!result.face) return { region: "body", ...texts };
  if (result.patch !== undefined) return { region: `patch ${result.face} ${numberOf(result.patch, rectanglesOf(problem.faces[result.face]))}`, ...texts };
  return { region: `${AXES.some((axis) => result[axis]) ? "rectangle" : "face"} ${result.face}`, ...texts };
}

const rectanglesOf = (face) => face.pads ?? (face.value ?? face.inflow ?? face.ambient).patches;

/** The place in a list of what is named by its number or its name. */
const numberOf = (named, all) => (typeof named === "number" ? named : all.findIndex(({ name }) => name === named));
