/** The part of the form for the faces: one card each, with what its condition needs. */

import { facesOf } from "./body_draft.js";
import { button, choice, field, intervals, longText, make, mistakePlace, writer } from "./elements.js";
import { emptyDatum, emptyPad, emptyPatch, mayRadiate } from "./faces_draft.js";
import { mixtureFields } from "./mixture_form.js";
import { idOf } from "./typed.js";
import { axesAcross, axisOf, CONDITIONS, PHYSICS, placeOf, placesOf } from "./words.js";

const DATUM_CHOICES = [
  ["uniform", "uniform"],
  ["patches", "with patches"],
  ["samples", "from readings"],
  ["formula", "by a formula"],
];

/** Write where each face lies, which changes with the sizes. */
export function showPlaces(draft) {
  for (const place of document.querySelectorAll("[data-place]")) {
    const { place: face } = place.dataset;
    const where = draft.isStack && face === "z_high" ? "on the last layer" : placeOf(face, draft.size, draft.units.length);
    place.textContent = ` ${placesOf(draft.isStack)[face]}, ${where}`;
  }
}

/**
 * All cards.
 * @param {any} draft
 * @param {() => void} changed called after every change
 */
export function faceCards(draft, changed) {
  return make(
    "div",
    { class: "face-cards", id: "faces", tabindex: -1 },
    mistakePlace("faces"),
    facesOf(draft).map((face) => faceCard(draft, face, changed)),
  );
}

function faceCard(draft, face, changed) {
  const known = draft.faces[face];
  const details = make("div", { class: "face-details" });
  const redraw = () => details.replaceChildren(...conditionFields(draft, face, changed));
  const select = choice({
    id: idOf(face, "condition"),
    label: "Condition",
    spoken: face,
    value: known.condition,
    options: Object.entries(CONDITIONS),
    onChange: (value) => {
      known.condition = value;
      if (value === "mixed" && !known.mixture.pads.length) known.mixture.pads.push(emptyPad());
      redraw();
      changed();
    },
  });
  redraw();
  return make(
    "fieldset",
    { class: "face-card", "data-face": face },
    make(
      "legend",
      {},
      make("span", { class: "face-name" }, face),
      make("span", { class: "face-place", "data-place": face }),
    ),
    select,
    details,
  );
}

function conditionFields(draft, face, changed) {
  const known = draft.faces[face];
  const words = PHYSICS[draft.potential];
  if (known.condition === "insulated") return [];
  if (known.condition === "mixed") return mixtureFields(draft, face, changed);
  const meaning = {
    held: { label: words.potential, kind: "potential" },
    flux: { label: words.inflow, kind: "flux" },
    film: { label: words.ambient, kind: "potential" },
  }[known.condition];
  const fields = [];
  if (known.condition === "film") {
    const isSideOfStack = draft.isStack && axisOf(face) !== "z";
    fields.push(
      field({
        id: idOf(face, "coefficient"),
        label: words.film,
        spoken: face,
        kind: "film_coefficient",
        value: known.coefficient,
        hint: isSideOfStack
          ? "Where layers conduct differently, one beside each layer from below, with semicolons between, in proportion to their conductivities."
          : undefined,
        onInput: writer(known, "coefficient", changed),
      }),
    );
  }
  const emissivity = known.condition === "film" && mayRadiate(draft)
    ? field({
        id: idOf(face, "emissivity"), label: "Emissivity (optional)", spoken: face, value: known.emissivity,
        hint: "With it the face also radiates to black surroundings at the same temperature; the film coefficient may then be 0.",
        onInput: writer(known, "emissivity", changed),
      })
    : null;
  return [...fields, datumFields(draft, face, meaning, changed), emissivity].filter(Boolean);
}

function datumFields(draft, face, meaning, changed) {
  const condition = draft.faces[face].condition;
  const datum = (draft.faces[face].data[condition] ??= emptyDatum());
  const id = idOf(face, condition);
  const rest = make("div", { class: "datum" });
  const redraw = () => rest.replaceChildren(...kindFields(draft, face, datum, id, meaning, changed, redraw));
  const kind = choice({
    id: idOf(id, "kind"),
    label: meaning.label,
    spoken: face,
    value: datum.kind,
    options: DATUM_CHOICES,
    onChange: (value) => {
      datum.kind = value;
      if (value === "patches" && !datum.patches.length) datum.patches.push(emptyPatch());
      redraw();
      changed();
    },
  });
  redraw();
  return make("div", { class: "datum-group" }, kind, rest);
}

function kindFields(draft, face, datum, id, meaning, changed, redraw) {
  if (datum.kind === "samples") return readingFields(draft, face, datum, id, meaning, changed);
  if (datum.kind === "formula") return [formulaField(face, datum, id, meaning, changed)];
  const value = field({
    id: idOf(id, "value"),
    label: datum.kind === "patches" ? "Background" : "Value",
    spoken: `${face}, ${meaning.label}`,
    kind: meaning.kind,
    value: datum.value,
    onInput: (typed) => {
      datum.value = typed;
      changed();
    },
  });
  if (datum.kind === "uniform") return [value];
  const add = button(
    {
      onclick: () => {
        datum.patches.push(emptyPatch());
        redraw();
        changed();
        document.getElementById(idOf(id, "patch", datum.patches.length - 1, "name"))?.focus();
      },
    },
    "Add a patch",
    make("span", { class: "unseen" }, ` on ${face}`),
  );
  return [
    value,
    ...datum.patches.map((_, index) => patchFields(draft, face, datum, index, id, meaning, changed, redraw)),
    add,
  ];
}

function patchFields(draft, face, datum, index, id, meaning, changed, redraw) {
  const patch = datum.patches[index];
  const part = idOf(id, "patch", index);
  const spoken = `${face}, patch ${index + 1}`;
  const remove = button(
    {
      class: "small quiet",
      onclick: () => {
        datum.patches.splice(index, 1);
        redraw();
        changed();
        document.getElementById(idOf(id, "kind"))?.focus();
      },
    },
    "Remove",
    make("span", { class: "unseen" }, ` ${spoken}`),
  );
  const isFlow = meaning.kind === "flux";
  const value = field({
    id: idOf(part, "value"), label: "Value", spoken, kind: isFlow && patch.isTotal ? "flow" : meaning.kind, value: patch.value,
    onInput: writer(patch, "value", changed), extraClass: isFlow ? "whole" : "",
  });
  return make(
    "fieldset",
    { class: "patch" },
    make("legend", {}, `Patch ${index + 1}`),
    field({ id: idOf(part, "name"), label: "Name (optional)", spoken, value: patch.name, isText: true, onInput: writer(patch, "name", changed) }),
    isFlow ? measureChoice(patch, part, spoken, changed, redraw) : null,
    value,
    intervals(axesAcross(axisOf(face)), patch, part, spoken, changed),
    remove,
  );
}

/** Whether a patch is given its flow per area or in total. */
function measureChoice(patch, part, spoken, changed, redraw) {
  return choice({
    id: idOf(part, "measure"), label: "Given as", spoken, value: patch.isTotal ? "total" : "density",
    options: [["density", "flow per area"], ["total", "total flow"]],
    onChange: (value) => {
      patch.isTotal = value === "total";
      redraw();
      changed();
      document.getElementById(idOf(part, "measure"))?.focus();
    },
  });
}

function formulaField(face, datum, id, meaning, changed) {
  const axes = axesAcross(axisOf(face));
  return field({
    id: idOf(id, "expression"), label: "Formula", spoken: `${face}, ${meaning.label}`, value: datum.expression, isText: true,
    extraClass: "whole", onInput: writer(datum, "expression", changed),
    hint: `In ${axes.join(" and ")}, in the units of lengths and of the ${meaning.kind === "flux" ? "flow per area" : "potential"}, `
      + `such as 30 + 600*exp(-((${axes[0]}-20)/8)^2).`,
  });
}

function readingFields(draft, face, datum, id, meaning, changed) {
  const [first, second] = axesAcross(axisOf(face));
  const tick = (key, label) =>
    make(
      "label",
      { class: "tick" },
      make("input", {
        type: "checkbox",
        id: idOf(id, key),
        checked: datum[key],
        onchange: (event) => {
          datum[key] = event.target.checked;
          changed();
        },
      }),
      make("span", { class: "unseen" }, `${face}: `),
      label,
    );
  return [
    longText({
      id: idOf(id, "csv"),
      label: "Readings",
      spoken: face,
      value: datum.csv,
      hint:
        `First row: places along ${second}; first column: places along ${first}, the corner ` +
        `is free. Bare numbers in the units of lengths and of the ${meaning.kind === "flux" ? "flow per area" : "potential"}. ` +
        "Between readings the value runs bilinearly.",
      onInput: (value) => {
        datum.csv = value;
        changed();
      },
    }),
    tick("hold", "Hold the outermost reading where readings end before the face"),
    tick("fill", "Fill missing readings smoothly from their neighbours"),
  ];
}
