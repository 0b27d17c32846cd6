/** Flow of each face, patch and plane as a table, what has no finite value and why, and the balance. */

import { make, scrolled, verdict } from "./elements.js";
import { bounded, brief, pretty, rough, shown, written } from "./numbers.js";
import { CONDITIONS, placesOf } from "./words.js";

/** A film coefficient, or the lowest and highest beside layers. */
const coefficient = ({ coefficient: given }, units) => [given].flat().map((one) => written(one, units.film_coefficient)).join(", ");

/** What is known on a face, in a few words, from the request. */
function knownOf(face, units) {
  const { condition } = face;
  const datum = (value, unit) => {
    if (typeof value !== "object") return written(value, unit);
    if (value.map === "samples") return "by readings";
    if (value.map === "formula") return "by a formula";
    const count = value.patches.length;
    return `${written(value.background, unit)} with ${count} ${count === 1 ? "patch" : "patches"}`;
  };
  if (condition === "held") return `held, ${datum(face.value, units.potential)}`;
  if (condition === "flux") return `inflow, ${datum(face.inflow, units.flux)}`;
  if (condition === "film") {
    const radiation = face.emissivity === undefined ? "" : ` and radiation, emissivity ${face.emissivity}`;
    return `film, ${coefficient(face, units)} to ${datum(face.ambient, units.potential)}${radiation}`;
  }
  if (condition === "mixed") {
    const count = face.pads.length;
    return `${count} ${count === 1 ? "pad" : "pads"} on ${knownOf(face.background, units)}`;
  }
  return CONDITIONS.insulated;
}

/** What is known on a patch or pad. */
function patchKnown({ face, patch, rectangle }, problem, units) {
  const ends = Object.entries(rectangle).map(([axis, [from, to]]) => `${axis} ${from === null ? "without end" : brief(from)} to ${to === null ? "the end" : brief(to)}`);
  return `${patchData(problem.faces[face], patch, units)}; ${ends.join(", ")} ${pretty(units.length)}`;
}

function patchData(known, index, units) {
  if (known.condition === "mixed") {
    const pad = known.pads[index];
    if (pad.condition === "film") return `film, ${coefficient(pad, units)} to ${written(pad.ambient, units.potential)}`;
    if (pad.condition === "flux") return pad.flow === undefined ? `inflow, ${written(pad.inflow, units.flux)}` : `${written(pad.flow, units.flow)} in all`;
    return pad.flow === undefined ? `held, ${written(pad.value, units.potential)}` : `held, ${written(pad.flow, units.flow)} given`;
  }
  const datum = known.value ?? known.inflow ?? known.ambient;
  const patch = datum.patches[index];
  if (patch.flow !== undefined) return `${written(patch.flow, units.flow)} in all`;
  return written(patch.value, known.condition === "flux" ? units.flux : units.potential);
}

/** One row of the table for each total, with its name for the reasons below. */
function totalsOf({ faces, patches, planes, units }, problem) {
  const rows = [];
  for (const [name, total] of Object.entries(faces)) {
    rows.push({ name, place: placesOf(Boolean(problem.body.layers))[name], known: knownOf(problem.faces[name], units), value: total.inflow, total });
    for (const part of patches.filter(({ face }) => face === name)) {
      rows.push({
        name: part.name ?? `patch ${part.patch + 1}`, place: `on ${name}`, known: patchKnown(part, problem, units),
        value: part.inflow, total: part, kind: "patch-row",
      });
    }
  }
  const [plane] = planes;
  const at = `${plane.axis} = ${brief(plane.position)} ${pretty(units.length)}`;
  rows.push({
    name: "plane shown", place: at, known: `counted towards higher ${plane.axis}`, value: plane.flow, total: plane,
    kind: "plane-row",
  });
  return rows;
}

/** Everything about flows. */
export function flowsView(answer, problem, edgeGap, words) {
  const { units } = answer;
  const unit = pretty(units.flow);
  const rows = totalsOf(answer, problem);
  const hasGap = rows.some(({ total }) => total.with_gap);
  const heads = ["Face", `Inflow, ${unit}`];
  if (hasGap) heads.push(`Beyond edge gaps of ${written(edgeGap, units.length)}, ${unit}`);
  const table = make(
    "table", { class: "numbers flows" },
    make("caption", {}, `${words.flow} into the body in ${unit}; what leaves is negative`),
    make("thead", {}, make("tr", {}, heads.map((head) => make("th", { scope: "col" }, head)))),
    make("tbody", {}, rows.map((row) => rowOf(row, hasGap))),
  );
  return [scrolled(table, "Flow of each face"), ...reasonsView(rows, units, hasGap), balanceView(answer)];
}

function rowOf({ name, place, known, value, total, kind }, hasGap) {
  const gap = total.with_gap;
  return make(
    "tr", { class: kind },
    make("th", { scope: "row" }, name, make("span", { class: "face-place" }, ` ${place}`), make("span", { class: "known" }, known)),
    value === null ? make("td", { class: "no-value" }, "no finite value") : numberCell(value, total.error_bound),
    hasGap ? (gap ? numberCell(gap.inflow ?? gap.flow, gap.error_bound) : make("td", {}, "\u2013")) : null,
  );
}

/** A number over its bound. */
function numberCell(value, bound) {
  return make("td", {}, shown(value, bound), make("span", { class: "known" }, bound > 0 ? `\u00b1 ${bounded(bound)}` : "exact"));
}

/** Why totals have no finite value; lines along which data jump alike are told once. */
function reasonsView(rows, units, hasGap) {
  const open = rows.filter(({ total }) => total.unbounded);
  if (!open.length) return [];
  const jumps = open.some(({ total }) => total.unbounded.some(({ kind }) => !kind.startsWith("endless")));
  return [
    make("h3", {}, "Why some flows have no finite value"),
    make("ul", { class: "reasons" }, open.map(({ name, place, total, kind }) => make("li", {},
      make("strong", {}, name, " ", make("span", { class: "face-place" }, place), ": "), reasonOf(total.unbounded, units, kind === "plane-row" ? ["pass towards the higher side", "pass towards the lower side"] : ["enter", "leave"])))),
    jumps ? make("p", { class: "hint" }, "Next to a line where held values jump the flow per area grows as one over the "
      + "distance, so its total grows without limit as the line is approached. A real joint always leaves a gap.") : null,
    jumps && !hasGap
      ? make("p", {}, "Name an ", make("a", { href: "#edge-gap" }, "edge gap"), " to see the finite flow through the rest.")
      : null,
  ].filter(Boolean);
}

/** @param {[string, string]} ways what flow does that is counted as positive, and as negative */
function reasonOf(causes, units, ways) {
  const flow = pretty(units.flow);
  const digits = (value) => brief(Number(Math.abs(value).toPrecision(4)));
  const endless = causes.filter(({ kind }) => kind.startsWith("endless")).map(({ kind, coefficient }) => {
    if (!coefficient) return "It goes on without end, and the flow through it grows without limit, ever more slowly.";
    const each = kind === "endless" ? `${pretty(units.length)} of its length` : `square ${pretty(units.length)}`;
    return `It goes on without end; far along ${digits(coefficient)} ${flow} `
      + `${coefficient >= 0 ? ways[0] : ways[1]} through each ${each}.`;
  });
  const jumps = causes.filter(({ kind }) => !kind.startsWith("endless"));
  if (!jumps.length) return endless.join(" ");
  const lines = jumps.map(({ line }) => line.replace(/^line /, ""));
  const most = Math.max(...jumps.map(({ largest_jump: jump }) => jump));
  const net = jumps.reduce((sum, { coefficient }) => sum + coefficient, 0);
  const sentence = `Held values jump by up to ${brief(most)} ${pretty(units.potential_difference)} along ${lines.join("; ")}. Made ten `
    + `times narrower, a gap ${lines.length > 1 ? "at these lines" : "there"} lets another ${digits(net * Math.LN10)} ${flow} pass.`;
  return [...endless, sentence].join(" ");
}

function balanceView({ balance, units }) {
  const { closed, generation, carried_off: carriedOff, residual, error_bound: bound, unbounded_faces: open } = balance;
  const unit = pretty(units.flow);
  const inside = generation ? ` ${shown(generation)} ${unit} are generated inside.` : "";
  if (closed === null) {
    return verdict("open", "No balance", `Faces without end have no finite inflow (${open.join(", ")}), so there is nothing to add up.${inside}`);
  }
  const sum = `Inflows and generation${carriedOff === null ? "" : `, less the ${shown(carriedOff)} ${unit} that flow away for ever,`} add up to ${rough(residual)} ${unit}; the bounds allow ${bounded(bound)} ${unit}.`;
  const rest = open.length ? " The parts that grow without limit cancel between the faces." : "";
  return closed
    ? verdict("good", "Balance closed", `${sum}${rest}${inside}`)
    : verdict("bad", "Balance not closed", `${sum} Do not rely on these flows.${inside}`);
}
