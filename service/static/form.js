/**
 * The form: body, faces, sources, what is to be shown, results, limits and a question. Every part writes into the draft it
 * is given.
 */

import { endsOf, facesOf } from "./body_draft.js";
import { bodyFields } from "./body_form.js";
import { choice, field, intervals, make, writer } from "./elements.js";
import { faceCards } from "./faces_form.js";
import { isSection } from "./grid_draft.js";
import { limitFields } from "./limit_form.js";
import { questionFields } from "./question_form.js";
import { resultFields } from "./result_form.js";
import { idOf } from "./typed.js";
import { AXES, axesAcross, LENGTH_UNITS, PHYSICS, UNIT_LABELS } from "./words.js";

/**
 * Draw the whole form, and its parts again when a choice changes what they ask for.
 * @param {any} draft
 * @param {() => void} changed called after every change of the draft
 * @param {() => void} drawn called after every drawing
 * @param {{now: () => void, study: () => void}} ask what the buttons of a question do
 */
export function drawForm(draft, changed, drawn, ask) {
  const parts = {
    body: () => bodyFields(draft, changed, redraw),
    units: () => unitFields(draft, changed),
    faces: () => [faceCards(draft, changed)],
    sources: () => sourceFields(draft, changed, redraw),
    view: () => viewFields(draft, changed, redraw),
    results: () => resultFields(draft, changed, redraw),
    limits: () => limitFields(draft, changed, redraw),
    decision: () => questionFields(draft, changed, redraw, ask),
  };
  function redraw(...names) {
    for (const name of names) {
      document.getElementById(`${name}-fields`).replaceChildren(...parts[name]().flat());
    }
    drawn();
  }
  redraw(...Object.keys(parts));
}

function unitFields(draft, changed) {
  const unit = (kind) =>
    field({
      id: idOf("unit", kind), label: UNIT_LABELS[kind], value: draft.units[kind], isText: true,
      list: kind === "length" ? "length-units" : undefined, onInput: writer(draft.units, kind, changed),
    });
  return [
    make("datalist", { id: "length-units" }, LENGTH_UNITS.map((name) => make("option", { value: name }))),
    ...Object.keys(UNIT_LABELS).map(unit),
  ];
}

function sourceFields(draft, changed, redraw) {
  const words = PHYSICS[draft.potential];
  const cards = draft.sources.map((source, index) => {
    const id = idOf("source", index);
    const spoken = `Source ${index + 1}`;
    const extent = choice({
      id: idOf(id, "extent"), label: "Where", spoken, value: source.whole ? "whole" : "box",
      options: [["whole", "in the whole body"], ["box", "in a box"]],
      onChange: (value) => {
        source.whole = value === "whole";
        changed();
        redraw("sources");
        document.getElementById(idOf(id, "extent")).focus();
      },
    });
    const remove = make(
      "button",
      {
        type: "button", class: "small quiet",
        onclick: () => {
          draft.sources.splice(index, 1);
          changed();
          redraw("sources");
          document.getElementById("add-source").focus();
        },
      },
      "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
    );
    return make(
      "fieldset", { class: "patch" }, make("legend", {}, spoken), extent,
      field({
        id: idOf(id, "density"), label: words.density, spoken, kind: "density", value: source.density,
        hint: "Negative for a sink.", onInput: writer(source, "density", changed),
      }),
      source.whole ? null : intervals(AXES, source, id, spoken, changed),
      source.whole ? null : make("p", { class: "hint whole" }, "An axis left empty: the whole length."),
      remove,
    );
  });
  const add = make(
    "button",
    {
      type: "button", class: "small", id: "add-source",
      onclick: () => {
        draft.sources.push({ whole: true, from: ["", "", ""], to: ["", "", ""], density: "", name: "" });
        changed();
        redraw("sources");
        document.getElementById(idOf("source", draft.sources.length - 1, "extent")).focus();
      },
    },
    "Add a source",
  );
  const nothing = cards.length ? [] : [make("p", { class: "hint whole" }, "Nothing is generated inside the body.")];
  return [...nothing, ...cards, add];
}

function viewFields(draft, changed, redraw) {
  const { plane, accuracy } = draft;
  const open = axesAcross(plane.axis).filter((axis) => endsOf(draft, axis) !== "finite");
  const reach = (axis, end, label) =>
    field({
      id: idOf("plane", end, axis), label, kind: "length", value: plane[end][axis], onInput: writer(plane[end], axis, changed),
    });
  return [
    choice({
      id: "plane-axis", label: "Plane square to", value: plane.axis,
      options: AXES.map((axis) => [axis, `${axis} (shows ${axesAcross(axis).join(" and ")})`]),
      onChange: (value) => {
        plane.axis = value;
        changed();
        redraw("view");
        document.getElementById("plane-axis").focus();
      },
    }),
    field({
      id: "plane-position", label: `at ${plane.axis} =`, kind: "length", value: plane.position, spoken: "Plane",
      onInput: writer(plane, "position", changed),
    }),
    ...open.flatMap((axis) => [
      endsOf(draft, axis) === "infinite" ? reach(axis, "from", `Draw from ${axis} =`) : null,
      reach(axis, "to", `Draw up to ${axis} =`),
    ]),
    isSection(draft) ? make("p", { class: "hint whole" }, "Every layer is drawn as thick as the others can bear, so that thin ones are seen.") : null,
    choice({
      id: "plane-count", label: "Places along each side", value: plane.count,
      options: [["41", "41 (quick)"], ["81", "81"], ["161", "161 (fine)"]],
      onChange: writer(plane, "count", changed),
    }),
    choice({
      id: "accuracy-kind", label: "Largest error", value: accuracy.kind,
      options: [
        ["usual", "the usual one"],
        ["5e-3", "five thousandths of the span"],
        ["1e-3", "a thousandth of the span"],
        ["1e-6", "a millionth of the span"],
        ["1e-9", "1e-9 of the span"],
        ["1e-12", "1e-12 of the span"],
        ["absolute", "a value of your own"],
      ],
      hint: "In parts of the span of the data. Usual are 1e-9; 1e-4 where film faces are iterated; 5e-3 or what can be "
        + "promised beside several conditions on a face.",
      onChange: (value) => {
        accuracy.kind = value;
        changed();
        redraw("view");
        document.getElementById("accuracy-kind").focus();
      },
    }),
    accuracy.kind === "absolute"
      ? field({
          id: "accuracy-absolute", label: "At most", kind: "difference", value: accuracy.absolute,
          spoken: "Largest error", onInput: writer(accuracy, "absolute", changed),
        })
      : null,
    ...reachFields(draft, changed, redraw),
    field({
      id: "edge-gap", label: "Edge gap (optional)", kind: "length", value: draft.edgeGap, extraClass: "whole",
      hint: "Width of the strip left out beside lines where held values jump. With it a flow that has no "
        + "finite value also comes as the finite flow through the rest.",
      onInput: writer(draft, "edgeGap", changed),
    }),
  ].filter(Boolean);
}

/** Which face is asked how far it reaches, and what of it. */
function reachFields(draft, changed, redraw) {
  const { reach } = draft;
  const faces = facesOf(draft);
  return [
    choice({
      id: "reach-face", label: "How far a face reaches", value: faces.includes(reach.face) ? reach.face : "",
      options: [["", "not asked"], ...faces.map((face) => [face, `that of ${face}`])],
      onChange: (value) => {
        reach.face = value;
        changed();
        redraw("view");
        document.getElementById("reach-face").focus();
      },
    }),
    faces.includes(reach.face)
      ? choice({
          id: "reach-change", label: "What of it is followed", value: reach.change,
          options: [["as_given", "its data as given"], ["uniform", "a change all over it"]],
          onChange: writer(reach, "change", changed),
        })
      : null,
  ];
}
