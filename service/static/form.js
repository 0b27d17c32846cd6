/** The form: body, faces, sources, and what is to be shown. Every part writes into the draft it is given. */

import { idOf } from "./draft.js";
import { choice, field, make } from "./elements.js";
import { faceCards, intervals } from "./faces_form.js";
import { AXES, axesAcross, LENGTH_UNITS, PHYSICS, UNIT_LABELS } from "./words.js";

/**
 * Draw the whole form, and its parts again when a choice changes what they ask for.
 * @param {any} draft
 * @param {() => void} changed called after every change of the draft
 * @param {() => void} drawn called after every drawing
 */
export function drawForm(draft, changed, drawn) {
  const parts = {
    body: () => bodyFields(draft, changed, redraw),
    units: () => unitFields(draft, changed),
    faces: () => [faceCards(draft, changed)],
    sources: () => sourceFields(draft, changed, redraw),
    view: () => viewFields(draft, changed, redraw),
  };
  function redraw(...names) {
    for (const name of names) {
      document.getElementById(`${name}-fields`).replaceChildren(...parts[name]().flat());
    }
    drawn();
  }
  redraw(...Object.keys(parts));
}

/** Writes a text of the draft. */
const writer = (owner, key, changed) => (value) => {
  owner[key] = value;
  changed();
};

function bodyFields(draft, changed, redraw) {
  const size = (axis) =>
    field({
      id: idOf("size", axis), label: `Length ${axis}`, kind: "length", value: draft.size[axis],
      onInput: writer(draft.size, axis, changed),
    });
  const words = PHYSICS[draft.potential];
  const conductivity = (key, label) =>
    field({
      id: idOf("conductivity", key), label, kind: "conductivity", value: draft.conductivity[key],
      spoken: words.conductivity, onInput: writer(draft.conductivity, key, changed),
    });
  return [
    field({
      id: "name", label: "Name (optional)", value: draft.name, isText: true, extraClass: "whole",
      onInput: writer(draft, "name", changed),
    }),
    choice({
      id: "potential", label: "Physics", value: draft.potential,
      options: Object.entries(PHYSICS).map(([key, { name }]) => [key, name]),
      onChange: (value) => {
        draft.potential = value;
        Object.assign(draft.units, PHYSICS[value].units);
        changed();
        redraw("units", "faces", "sources", "view", "body");
        document.getElementById("potential").focus();
      },
    }),
    choice({
      id: "body-kind", label: "Body", value: draft.isBar ? "bar" : "block",
      options: [["block", "block, ends at z"], ["bar", "bar, no far end along z"]],
      onChange: (value) => {
        draft.isBar = value === "bar";
        changed();
        redraw("body", "faces", "view");
        document.getElementById("body-kind").focus();
      },
    }),
    make(
      "div", { class: "triple" }, size("x"), size("y"),
      draft.isBar ? make("p", { class: "endless", id: "endless" }, make("span", {}, "Length z"), "without end") : size("z"),
    ),
    choice({
      id: "conductivity-kind", label: words.conductivity, value: draft.isSame ? "same" : "each", extraClass: "whole",
      options: [["same", "the same along all axes"], ["each", "one along each axis"]],
      onChange: (value) => {
        draft.isSame = value === "same";
        const all = draft.conductivity;
        if (draft.isSame) all.all ||= all.x;
        else for (const axis of AXES) all[axis] ||= all.all;
        changed();
        redraw("body");
        document.getElementById("conductivity-kind").focus();
      },
    }),
    draft.isSame
      ? conductivity("all", "Along all axes")
      : make("div", { class: "triple" }, AXES.map((axis) => conductivity(axis, `Along ${axis}`))),
  ];
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
  const showsOpenEnd = draft.isBar && plane.axis !== "z";
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
    showsOpenEnd
      ? field({
          id: "plane-reach", label: "Draw the bar up to z =", kind: "length", value: plane.reach,
          onInput: writer(plane, "reach", changed),
        })
      : null,
    choice({
      id: "plane-count", label: "Places along each side", value: plane.count,
      options: [["41", "41 (quick)"], ["81", "81"], ["161", "161 (fine)"]],
      onChange: writer(plane, "count", changed),
    }),
    choice({
      id: "accuracy-kind", label: "Largest error", value: accuracy.kind,
      options: [
        ["1e-3", "a thousandth of the span"],
        ["1e-6", "a millionth of the span"],
        ["1e-9", "1e-9 of the span"],
        ["1e-12", "1e-12 of the span"],
        ["absolute", "a value of your own"],
      ],
      hint: "The span is that of the given data.",
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
    field({
      id: "edge-gap", label: "Edge gap (optional)", kind: "length", value: draft.edgeGap, extraClass: "whole",
      hint: "Width of the strip left out beside lines where held values jump. With it a flow that has no "
        + "finite value also comes as the finite flow through the rest.",
      onInput: writer(draft, "edgeGap", changed),
    }),
  ].filter(Boolean);
}
