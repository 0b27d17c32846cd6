/** The part of the form for the body: its ends, its material or its layers. */

import { emptyLayer, endsOf, isOpen, isTabled } from "./body_draft.js";
import { button, choice, field, make, mistakePlace, writer } from "./elements.js";
import { lawFields } from "./law_form.js";
import { idOf } from "./typed.js";
import { AXES, PHYSICS } from "./words.js";

const ENDS = [
  ["finite", "from 0 to a length"],
  ["semi-infinite", "from 0 without end"],
  ["infinite", "without any end"],
];

const focus = (id) => document.getElementById(id)?.focus();

/**
 * @param {any} draft
 * @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 */
export function bodyFields(draft, changed, redraw) {
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
        redraw("units", "faces", "sources", "view", "results", "body");
        focus("potential");
      },
    }),
    kindChoice(draft, changed, redraw),
    make("div", { class: "triple" }, AXES.map((axis) => sizeField(draft, axis, changed))),
    endsFields(draft, changed, redraw),
    ...(draft.isStack ? layerFields(draft, changed, redraw) : conductivityFields(draft, changed, redraw)),
  ];
}

function kindChoice(draft, changed, redraw) {
  const along = { finite: "block", "semi-infinite": "bar", infinite: "endless" }[draft.ends.z];
  return choice({
    id: "body-kind", label: "Body", value: draft.isStack ? "stack" : along,
    options: [
      ["block", "block, ends at z"], ["bar", "bar or half-space, no far end along z"], ["endless", "no ends along z"],
      ["stack", "stack of layers along z"],
    ],
    onChange: (value) => {
      draft.isStack = value === "stack";
      if (!draft.isStack) draft.ends.z = { block: "finite", bar: "semi-infinite", endless: "infinite" }[value];
      if (draft.isStack && !draft.layers.length) {
        draft.layers.push({ ...emptyLayer(), thickness: draft.size.z, all: draft.conductivity.all }, emptyLayer());
      }
      changed();
      redraw("body", "faces", "view", "results");
      focus("body-kind");
    },
  });
}

function sizeField(draft, axis, changed) {
  const ends = endsOf(draft, axis);
  const fixed = (words) => make("p", { class: "endless", id: `endless-${axis}` }, make("span", {}, `Length ${axis}`), words);
  if (axis === "z" && draft.isStack) return fixed("that of the layers");
  if (ends !== "finite") return fixed(ends === "infinite" ? "no ends" : "without end");
  return field({
    id: idOf("size", axis), label: `Length ${axis}`, kind: "length", value: draft.size[axis],
    onInput: writer(draft.size, axis, changed),
  });
}

/** Ends along x and y, folded away where they are as usual. */
function endsFields(draft, changed, redraw) {
  const across = ["x", "y"];
  const choices = across.map((axis) =>
    choice({
      id: idOf("ends", axis), label: `Along ${axis}`, value: draft.ends[axis], options: ENDS,
      onChange: (value) => {
        draft.ends[axis] = value;
        changed();
        redraw("body", "faces", "view");
        focus(idOf("ends", axis));
      },
    }),
  );
  const isAny = isOpen(draft);
  const far = isAny ? field({
    id: "far-level", label: `${PHYSICS[draft.potential].potential} far away (optional)`, kind: "potential", value: draft.farLevel,
    hint: "Only where no face fixes it, such as that of undisturbed ground; zero if empty.", extraClass: "whole",
    onInput: writer(draft, "farLevel", changed),
  }) : null;
  return make(
    "details", { class: "whole", open: across.some((axis) => draft.ends[axis] !== "finite") },
    make("summary", {}, isAny ? "Ends along x and y, and what is far away" : "Ends along x and y"),
    make("div", { class: "fields" }, choices, far),
    make("p", { class: "hint" }, "Without any end along x and y, a body that ends along z is a plate, and one without a far end a half-space."),
  );
}

function conductivityFields(draft, changed, redraw) {
  const words = PHYSICS[draft.potential];
  const conductivity = (key, label) =>
    field({
      id: idOf("conductivity", key), label, kind: "conductivity", value: draft.conductivity[key],
      spoken: words.conductivity, onInput: writer(draft.conductivity, key, changed),
    });
  return [
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
        focus("conductivity-kind");
      },
    }),
    draft.isSame
      ? (isTabled(draft) ? null : conductivity("all", "Along all axes"))
      : make("div", { class: "triple" }, AXES.map((axis) => conductivity(axis, `Along ${axis}`))),
    ...lawFields(draft, changed, redraw),
    draft.law.kind === "conductivities" && !draft.isSame
      ? make("p", { class: "hint whole" }, "The table is that along x; along y and z it is in proportion.") : null,
  ].filter(Boolean);
}

/** The layers, drawn as they lie: the last one is on top. */
function layerFields(draft, changed, redraw) {
  const add = button(
    {
      id: "add-layer",
      onclick: () => {
        draft.layers.push(emptyLayer());
        changed();
        redraw("body", "faces", "view");
        focus(idOf("layer", draft.layers.length - 1, "name"));
      },
    },
    "Add a layer on top",
  );
  const cards = draft.layers.map((_, index) => layerCard(draft, index, changed, redraw));
  return [
    make("p", { class: "hint whole" }, "The layers as they lie, the highest z on top. The first one is the bottom, z_low."),
    add, mistakePlace("add-layer"),
    make("div", { class: "layers whole" }, cards.reverse()),
  ];
}

function layerCard(draft, index, changed, redraw) {
  const layer = draft.layers[index];
  const id = idOf("layer", index);
  const words = PHYSICS[draft.potential];
  const spoken = `Layer ${index}`;
  const text = (key, part, label, kind, more = {}) =>
    field({ id: idOf(id, part), label, spoken, kind, value: layer[key], onInput: writer(layer, key, changed), ...more });
  const kind = choice({
    id: idOf(id, "kind"), label: words.conductivity, spoken, value: layer.kind,
    options: [["same", "the same all ways"], ["plane", "in the plane and through it"]],
    onChange: (value) => {
      layer.kind = value;
      if (value === "same") layer.all ||= layer.inPlane;
      else {
        layer.inPlane ||= layer.all;
        layer.through ||= layer.all;
      }
      changed();
      redraw("body");
      focus(idOf(id, "kind"));
    },
  });
  const contact = choice({
    id: idOf(id, "contact-kind"), label: "Joined to the layer below", spoken, value: layer.contactKind,
    options: [["bonded", "bonded perfectly"], ["conductance", "contact conductance"], ["resistance", "contact resistance"]],
    onChange: (value) => {
      layer.contactKind = value;
      changed();
      redraw("body");
      focus(idOf(id, "contact-kind"));
    },
  });
  const remove = button(
    {
      class: "small quiet",
      onclick: () => {
        draft.layers.splice(index, 1);
        changed();
        redraw("body", "faces", "view");
        focus("add-layer");
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make(
    "fieldset", { class: "patch layer" }, make("legend", {}, spoken),
    field({ id: idOf(id, "name"), label: "Name (optional)", spoken, value: layer.name, isText: true, onInput: writer(layer, "name", changed) }),
    text("thickness", "thickness", "Thickness", "length"),
    kind,
    layer.kind === "same" ? text("all", "all", "All ways", "conductivity") : text("inPlane", "in-plane", "In the plane", "conductivity"),
    layer.kind === "plane" ? text("through", "through", "Through it", "conductivity") : null,
    text("generation", "generation", "Generation (optional)", "density"),
    index ? contact : null,
    index && layer.contactKind !== "bonded"
      ? text("contact", "contact", `Contact ${layer.contactKind}`, layer.contactKind === "resistance" ? "contact_resistance" : "film_coefficient")
      : null,
    draft.layers.length > 1 ? remove : null,
  );
}
