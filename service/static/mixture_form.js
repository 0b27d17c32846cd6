/** The fields of a face with several conditions: a background, and pads with conditions of their own. */

import { button, choice, field, intervals, make, mistakePlace, writer } from "./elements.js";
import { emptyPad } from "./faces_draft.js";
import { idOf } from "./typed.js";
import { axesAcross, axisOf, CONDITIONS, PHYSICS } from "./words.js";

const PAD_KINDS = [
  ["held", "held at a value"],
  ["flow", "held, its total flow given"],
  ["film", "film of its own"],
  ["inflow", "given inflow per area"],
  ["spread", "given inflow in all"],
];

/** @param {any} draft @param {string} face @param {() => void} changed */
export function mixtureFields(draft, face, changed) {
  const { mixture } = draft.faces[face];
  const rest = make("div", { class: "datum" });
  const redraw = () => rest.replaceChildren(...parts());
  const parts = () => [
    ...backgroundFields(draft, face, mixture.background, changed, redraw),
    ...mixture.pads.map((_, index) => padCard(draft, face, index, changed, redraw)),
    button(
      {
        id: idOf(face, "add-pad"),
        onclick: () => {
          mixture.pads.push(emptyPad());
          redraw();
          changed();
          document.getElementById(idOf(face, "pad", mixture.pads.length - 1, "name"))?.focus();
        },
      },
      "Add a pad", make("span", { class: "unseen" }, ` on ${face}`),
    ),
    mistakePlace(idOf(face, "add-pad")),
  ];
  redraw();
  return [make("div", { class: "datum-group" }, rest)];
}

function backgroundFields(draft, face, background, changed, redraw) {
  const id = idOf(face, "background");
  const words = PHYSICS[draft.potential];
  const text = (key, label, kind) =>
    field({ id: idOf(id, key), label, spoken: `${face}, between the pads`, kind, value: background[key], onInput: writer(background, key, changed) });
  return [
    choice({
      id: idOf(id, "condition"), label: "Between the pads", spoken: face, value: background.condition, extraClass: "whole",
      options: ["insulated", "flux", "film"].map((condition) => [condition, CONDITIONS[condition]]),
      onChange: (value) => {
        background.condition = value;
        redraw();
        changed();
        document.getElementById(idOf(id, "condition"))?.focus();
      },
    }),
    background.condition === "film" ? text("coefficient", words.film, "film_coefficient") : null,
    background.condition === "film" ? text("value", words.ambient, "potential") : null,
    background.condition === "flux" ? text("value", words.inflow, "flux") : null,
  ].filter(Boolean);
}

function padCard(draft, face, index, changed, redraw) {
  const { pads } = draft.faces[face].mixture;
  const pad = pads[index];
  const id = idOf(face, "pad", index);
  const words = PHYSICS[draft.potential];
  const spoken = `${face}, pad ${index + 1}`;
  const [label, measure] = {
    held: [words.potential, "potential"], flow: [words.flow, "flow"], film: [words.ambient, "potential"],
    inflow: [words.inflow, "flux"], spread: [words.flow, "flow"],
  }[pad.kind];
  const text = (key, named, kind, more = {}) =>
    field({ id: idOf(id, key), label: named, spoken, kind, value: pad[key], onInput: writer(pad, key, changed), ...more });
  const remove = button(
    {
      class: "small quiet",
      onclick: () => {
        pads.splice(index, 1);
        redraw();
        changed();
        document.getElementById(idOf(face, "add-pad"))?.focus();
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make(
    "fieldset", { class: "patch" }, make("legend", {}, `Pad ${index + 1}`),
    text("name", "Name (optional)", undefined, { isText: true }),
    choice({
      id: idOf(id, "kind"), label: "Condition", spoken, value: pad.kind, options: PAD_KINDS,
      onChange: (value) => {
        pad.kind = value;
        redraw();
        changed();
        document.getElementById(idOf(id, "kind"))?.focus();
      },
    }),
    pad.kind === "film" ? text("coefficient", words.film, "film_coefficient") : null,
    text("value", label, measure, pad.kind === "film" ? {} : { extraClass: "whole" }),
    intervals(axesAcross(axisOf(face)), pad, id, spoken, changed),
    remove,
  );
}
