/** What readings say about unknown numbers, as it is typed and as a request wants it. */

import { facesOf } from "./body_draft.js";
import { DATUM_KEYS } from "./faces_draft.js";
import { referencesOf } from "./number_draft.js";
import { namesOf } from "./result_draft.js";
import { samplesOfText } from "./samples_text.js";
import { idOf, quantity, text } from "./typed.js";

/** @typedef {{result: string, value: string, uncertainty: string}} ReadingDraft a reading of a result, by its id */

/** @returns {ReadingDraft} */
export const emptyReading = (result = "", uncertainty = "") => ({ result, value: "", uncertainty });

export const textsOf = ({ low, high, spacing, known_before: before }) => ({
  low: text(low), high: text(high), spacing: text(spacing), before: text(before?.value), beforeUncertainty: text(before?.standard_uncertainty),
});

/** @param {any} asked a request, or nothing @param {import("./result_draft.js").ResultDraft[]} results */
export function ownOf({ readings = [], shared_errors: [shared] = [], smooth_map: map, uncertainties, profile_intervals: profile, starts, seed }, results) {
  const idNamed = (named) => results.find(({ name }) => name === named)?.id ?? "";
  return {
    readings: readings.map(({ result, value, standard_uncertainty: uncertainty }) => ({ result: idNamed(result), value: text(value), uncertainty: text(uncertainty) })),
    shared: text(shared?.standard_uncertainty), sharedBy: (shared?.results ?? []).map(idNamed), uncertainties: uncertainties ?? "given", profile: Boolean(profile),
    mapFace: map?.map.split("/")[3] ?? "", mapName: text(map?.name), typical: text(map?.typical), departure: text(map?.departure), starts: text(starts), seed: text(seed), table: "",
  };
}

/** Faces whose readings may be looked for as a map. */
export const facesWithReadings = (draft) => facesOf(draft).filter((face) => draft.faces[face].data[draft.faces[face].condition]?.kind === "samples");

/** Part of a request, each place of which is noted with its field. @param {any} problem of the request */
export function requestOf(draft, limits, note, problem) {
  const { numbers, own } = draft.question;
  const { readings, shared, sharedBy, uncertainties, profile, starts, seed } = own.calibration;
  const names = namesOf(draft);
  for (const [key, id] of [["unknowns", "numbers"], ["readings", "add-reading"], ["shared_errors", "calibration-shared"], ["starts", "calibration-starts"], ["seed", "calibration-seed"], ["uncertainties", "calibration-uncertainties"]]) note(`#/${key}`, id);
  note("#/shared_errors/0/results", "calibration-sharedBy");
  const references = referencesOf(draft, numbers, numbers.map((_, index) => `#/unknowns/${index}`), note, ({ texts }, pointer, id) => {
    for (const key of ["low", "high", "spacing"]) note(`${pointer}/${key}`, idOf(id, key));
    note(`${pointer}/known_before`, idOf(id, "before"));
    note(`${pointer}/known_before/standard_uncertainty`, idOf(id, "beforeUncertainty"));
    const { low = "", high = "", spacing, before = "", beforeUncertainty = "" } = texts;
    return {
      low: quantity(low), high: quantity(high), ...(spacing ? { spacing } : {}),
      ...(before.trim() || beforeUncertainty.trim() ? { known_before: { value: quantity(before), standard_uncertainty: quantity(beforeUncertainty) } } : {}),
    };
  });
  const written = readings.map(({ result, value, uncertainty }, index) => {
    for (const [key, part] of [["result", "result"], ["value", "value"], ["standard_uncertainty", "uncertainty"]]) note(`#/readings/${index}/${key}`, idOf("reading", index, part));
    return { result: names.get(result) ?? "", value: quantity(value), standard_uncertainty: quantity(uncertainty) };
  });
  const sharers = sharedBy.filter((id) => names.has(id)).map((id) => names.get(id));
  return {
    ...(references.length ? { unknowns: references } : {}), readings: written,
    ...(shared.trim() ? { shared_errors: [{ results: sharers, standard_uncertainty: quantity(shared) }] } : {}),
    ...(uncertainties === "given" ? {} : { uncertainties }), ...(profile ? { profile_intervals: true } : {}),
    ...(starts.trim() ? { starts: quantity(starts) } : {}), ...(seed.trim() ? { seed: quantity(seed) } : {}), ...mapOf(draft, problem, note),
  };
}

/** The map that is looked for; its entries have to stand in the request one by one. */
function mapOf(draft, problem, note) {
  const { mapFace, mapName, typical, departure } = draft.question.own.calibration;
  for (const [key, part] of [["", "mapFace"], ["/map", "mapFace"], ["/name", "mapName"], ["/typical", "typical"], ["/departure", "departure"]]) note(`#/smooth_map${key}`, `calibration-${part}`);
  if (!facesWithReadings(draft).includes(mapFace)) return {};
  const face = problem.faces[mapFace];
  const key = DATUM_KEYS[face.condition];
  const { csv, ...map } = face[key];
  note(`#/problem/faces/${mapFace}/${key}/table`, idOf(mapFace, face.condition, "csv"));
  return {
    problem: { ...problem, faces: { ...problem.faces, [mapFace]: { ...face, [key]: { ...map, ...samplesOfText(csv, mapFace) } } } },
    smooth_map: {
      name: mapName.trim() || "map", map: `/problem/faces/${mapFace}/${key}`,
      ...(typical.trim() ? { typical: quantity(typical) } : {}), ...(departure.trim() ? { departure: quantity(departure) } : {}),
    },
  };
}
