/** The part of the form for results with names: one card each. */

import { facesOf } from "./body_draft.js";
import { button, choice, field, make, mistakePlace, writer } from "./elements.js";
import { listChoice } from "./lists.js";
import { axesOfRegion, faceWords, regionsOf } from "./regions.js";
import { AT_A_PLACE, emptyResult, namesOf, OF_A_PART, OF_TWO } from "./result_draft.js";
import { idOf } from "./typed.js";
import { AXES, PHYSICS } from "./words.js";

const kindsOf = (words) => [
  ["highest", `highest ${words.potential.toLowerCase()} in a part`],
  ["lowest", `lowest ${words.potential.toLowerCase()} in a part`],
  ["mean", `mean ${words.potential.toLowerCase()} of a face or pad`],
  ["potential", `${words.potential.toLowerCase()} at a place`],
  ["inflow", `${words.flow.toLowerCase()} into a face or pad`],
  ["flow", `${words.flow.toLowerCase()} through a plane`],
  ["flux", `${words.flow.toLowerCase()} per area at a place`],
  ["gradient", `slope of the ${words.potential.toLowerCase()} at a place`],
  ["reach", "how far a face reaches"],
  ["difference", "one result less another"],
  ["ratio", "one result over another"],
];

/** Results before one, to be named by it. */
const earlier = (draft, result) => {
  const names = namesOf(draft);
  const index = draft.results.indexOf(result);
  return [[null, draft.results.slice(0, index).map(({ id }) => [id, names.get(id)])]];
};

/** All results with their names, for a choice. @returns {import("./lists.js").Group[]} */
export const resultEntries = (draft) => [[null, [...namesOf(draft)]]];

/**
 * @param {any} draft
 * @param {() => void} changed called after every change
 * @param {(...names: string[]) => void} redraw draws parts of the form again
 */
export function resultFields(draft, changed, redraw) {
  const add = button(
    {
      id: "add-result",
      onclick: () => {
        draft.results.push(emptyResult());
        changed();
        redraw("results");
        document.getElementById(idOf("result", draft.results.at(-1).id, "kind")).focus();
      },
    },
    "Add a result",
  );
  const nothing = draft.results.length
    ? [] : [make("p", { class: "hint whole" }, "Single numbers to decide by: a place, a pad, the hottest spot, a flow. None is named yet. They are computed together with the field.")];
  const cards = draft.results.map((_, index) => resultCard(draft, index, changed, redraw));
  return [...nothing, ...cards, add, mistakePlace("add-result")];
}

function resultCard(draft, index, changed, redraw) {
  const result = draft.results[index];
  const id = idOf("result", result.id);
  const spoken = `Result ${index + 1}`;
  const again = (focus) => {
    changed();
    redraw("results", "limits", "decision");
    document.getElementById(focus)?.focus();
  };
  const kind = choice({
    id: idOf(id, "kind"), label: "What", spoken, value: result.kind, options: kindsOf(PHYSICS[draft.potential]), extraClass: "whole",
    onChange: (value) => {
      result.kind = value;
      fitToKind(draft, result);
      again(idOf(id, "kind"));
    },
  });
  const remove = button(
    {
      class: "small quiet beside",
      onclick: () => {
        draft.results.splice(index, 1);
        again("add-result");
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make(
    "fieldset", { class: "patch" }, make("legend", {}, spoken), kind, ...detailFields(draft, result, id, spoken, changed, again),
    field({
      id: idOf(id, "name"), label: "Name (optional)", spoken, value: result.name, isText: true,
      onInput: writer(result, "name", changed),
    }),
    remove,
  );
}

/** What a result of another kind begins with: a part it can be of, a face, two results before it. */
function fitToKind(draft, result) {
  const { kind, region } = result;
  const [face] = facesOf(draft);
  const isOfFaces = ["mean", "inflow"].includes(kind);
  if (isOfFaces && ["body", "box", "layer"].includes(region.split(" ")[0])) result.region = face ? `face ${face}` : "";
  result.face ||= face ?? "";
  if (kind in OF_TWO) {
    const [[, before]] = earlier(draft, result);
    result.of ||= before[0]?.[0] ?? "";
    result.other ||= before[1]?.[0] ?? "";
  }
}

function detailFields(draft, result, id, spoken, changed, again) {
  const { kind } = result;
  if (AT_A_PLACE.includes(kind)) return placeFields(draft, result, id, spoken, changed);
  if (OF_A_PART.includes(kind)) return partFields(draft, result, id, spoken, changed, again);
  if (kind === "flow") {
    return [
      choice({
        id: idOf(id, "axis"), label: "Plane square to", spoken, value: result.axis, options: AXES.map((axis) => [axis, axis]),
        onChange: (value) => {
          result.axis = value;
          again(idOf(id, "axis"));
        },
      }),
      field({ id: idOf(id, "position"), label: `at ${result.axis} =`, spoken, kind: "length", value: result.position, onInput: writer(result, "position", changed) }),
    ];
  }
  if (kind === "reach") {
    return [
      listChoice({
        id: idOf(id, "face"), label: "Face", spoken, value: result.face, gone: "choose a face",
        groupsOf: () => [[null, facesOf(draft).map((face) => [face, faceWords(face)])]], onChange: writer(result, "face", changed),
      }),
      field({ id: idOf(id, "fraction"), label: "Fallen to", spoken, value: result.fraction, onInput: writer(result, "fraction", changed) }),
    ];
  }
  const other = (key, label) => listChoice({
    id: idOf(id, key), label, spoken, value: result[key], gone: "choose a result", groupsOf: () => earlier(draft, result),
    onChange: (value) => {
      result[key] = value;
      changed();
    },
  });
  return [other("of", "Result"), other("other", OF_TWO[kind])];
}

function placeFields(draft, result, id, spoken, changed) {
  const at = AXES.map((axis, side) => field({
    id: idOf(id, axis), label: axis, spoken, kind: "length", value: result.at[side],
    onInput: (value) => {
      result.at[side] = value;
      changed();
    },
  }));
  return [
    make("div", { class: "triple tight" }, at),
    make("p", { class: "hint whole" }, "Also low, middle or high for the sides of the body and the middle between them."),
    result.kind === "potential" ? null : choice({
      id: idOf(id, "along"), label: "Along", spoken, value: result.along, options: [["", "its size"], ...AXES.map((axis) => [axis, axis])],
      onChange: writer(result, "along", changed),
    }),
    draft.isStack ? choice({
      id: idOf(id, "side"), label: "On an interface", spoken, value: result.side, options: [["", "its lower side"], ["above", "its upper side"]],
      onChange: writer(result, "side", changed),
    }) : null,
  ].filter(Boolean);
}

function partFields(draft, result, id, spoken, changed, again) {
  const ends = axesOfRegion(result.region).flatMap((axis) => ["from", "to"].map((end) => field({
    id: idOf(id, axis, end), label: `${axis} ${end}`, spoken, kind: "length", value: result[end][AXES.indexOf(axis)],
    onInput: (value) => {
      result[end][AXES.indexOf(axis)] = value;
      changed();
    },
  })));
  return [
    listChoice({
      id: idOf(id, "region"), label: "Where", spoken, value: result.region, gone: result.region ? "no longer there" : "choose a face or pad", extraClass: "whole",
      groupsOf: () => regionsOf(draft, ["mean", "inflow"].includes(result.kind)),
      onChange: (value) => {
        result.region = value;
        again(idOf(id, "region"));
      },
    }),
    ...ends,
    result.region === "box" ? make("p", { class: "hint whole" }, "An axis left empty: from side to side.") : null,
  ].filter(Boolean);
}

/** Write into empty name fields what the results are called without one. */
export function showPlainNames(draft) {
  const names = namesOf(draft);
  for (const result of draft.results) {
    const input = document.getElementById(idOf("result", result.id, "name"));
    if (input) input.placeholder = names.get(result.id);
  }
}
