/** The problem of a draft, as a request wants it. */

import { bodyOf, facesOf } from "./body_draft.js";
import { faceOf } from "./faces_draft.js";
import { entry, idOf, quantity } from "./typed.js";
import { AXES } from "./words.js";

/** A problem of a request, each place of which is noted with its field. */
export function problemOf(draft, note) {
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
