/** The fields of calibration: what is not known, and what was read. */

import { emptyReading, facesWithReadings } from "./calibration_draft.js";
import { button, choice, field, longText, make, mistakePlace, writer } from "./elements.js";
import { listChoice, listTicks } from "./lists.js";
import { numberText } from "./number_form.js";
import { takeOver } from "./places_table.js";
import { faceWords } from "./regions.js";
import { namesOf } from "./result_draft.js";
import { resultEntries } from "./result_form.js";
import { idOf } from "./typed.js";

export const mostNumbers = () => 20;

export const fieldsOfNumber = () => (number, id, spoken, changed) => {
  const [kind, step] = [`number-${number.id}`, `step-${number.id}`];
  const text = (key, label, more) => numberText(number, id, spoken, changed, key, label, more);
  const { before = "", beforeUncertainty = "", spacing = "" } = number.texts;
  return [
    text("low", "Looked for from", { kind }), text("high", "to", { kind }),
    make("details", { class: "whole", open: Boolean(before || beforeUncertainty || spacing) },
      make("summary", {}, "Known of it before, and how it is looked for"),
      make("div", { class: "fields" },
        text("before", "Known as (optional)", { kind }), text("beforeUncertainty", "Standard uncertainty", { kind: step }),
        choice({
          id: idOf(id, "spacing"), label: "Looked for", spoken, value: spacing, extraClass: "whole", onChange: writer(number.texts, "spacing", changed),
          options: [["", "as its range suggests"], ["linear", "evenly"], ["logarithmic", "evenly in its logarithm"]],
        }))),
  ];
};

export function ownFields(draft, changed, again, redraw) {
  const own = draft.question.own.calibration;
  const text = (key, label, more = {}) => field({ id: `calibration-${key}`, label, value: own[key], onInput: writer(own, key, changed), ...more });
  const add = button(
    {
      id: "add-reading",
      onclick: () => {
        const unread = draft.results.find(({ id }) => own.readings.every(({ result }) => result !== id));
        own.readings.push(emptyReading(unread?.id, own.readings.at(-1)?.uncertainty));
        again(idOf("reading", own.readings.length - 1, "value"));
      },
    },
    "Add a reading",
  );
  const [firstRead] = own.sharedBy.length ? own.sharedBy : own.readings.map(({ result }) => result);
  return [
    make("h3", { class: "whole" }, "Readings"),
    ...own.readings.map((_, index) => readingRow(draft, index, changed, again)), add, mistakePlace("add-reading"),
    placesTable(own, draft, changed, redraw),
    make("details", { class: "whole", open: Boolean(own.shared) }, make("summary", {}, "An error that readings share"), make("div", { class: "fields" },
      text("shared", "Standard uncertainty", { kind: `result-${firstRead}-difference`, hint: "As of one reference junction: it does not average out." }),
      listTicks({
        id: "calibration-sharedBy", label: "Shared by the readings of", ticked: own.sharedBy, entriesOf: () => [...namesOf(draft)].filter(([id]) => own.readings.some(({ result }) => result === id)),
        onChange: writer(own, "sharedBy", changed), nothing: "There are no readings.",
      }))),
    mapFields(draft, text, again),
    make("details", { class: "whole" }, make("summary", {}, "How uncertainties are taken, and how long to search"), make("div", { class: "fields" },
      choice({
        id: "calibration-uncertainties", label: "Uncertainties are", value: own.uncertainties, onChange: writer(own, "uncertainties", changed),
        options: [["given", "as given"], ["relative", "weights only"]],
      }),
      choice({
        id: "calibration-profile", label: "Intervals", value: own.profile ? "profile" : "", options: [["", "plain"], ["profile", "also by the sum of squares"]],
        onChange: (value) => {
          own.profile = value === "profile";
          changed();
        },
      }),
      text("starts", "Starts (optional)"), text("seed", "Seed (optional)"))),
  ].filter(Boolean);
}

function readingRow(draft, index, changed, again) {
  const { readings } = draft.question.own.calibration;
  const reading = readings[index];
  const id = idOf("reading", index);
  const spoken = `Reading ${index + 1}`;
  const text = (key, label, kind) => field({ id: idOf(id, key), label, spoken, kind, value: reading[key], onInput: writer(reading, key, changed) });
  const remove = button(
    {
      class: "small quiet beside",
      onclick: () => {
        readings.splice(index, 1);
        again("add-reading");
      },
    },
    "Remove", make("span", { class: "unseen" }, ` ${spoken}`),
  );
  return make("div", { class: "reading whole" },
    listChoice({
      id: idOf(id, "result"), label: "Read at", spoken, value: reading.result, groupsOf: () => resultEntries(draft), gone: "choose a result",
      onChange: (value) => {
        reading.result = value;
        again(idOf(id, "result"));
      },
    }),
    text("value", "Reading", `result-${reading.result}`), text("uncertainty", "Standard uncertainty", `result-${reading.result}-difference`), remove);
}

/** Places and their readings out of a spreadsheet, all at once. */
function placesTable(own, draft, changed, redraw) {
  return make("details", { class: "whole" }, make("summary", {}, "Places and readings from a table"), make("div", { class: "fields" },
    longText({
      id: "calibration-table", label: "Table", value: own.table, rows: 4, onInput: writer(own, "table", changed),
      hint: "A line for each: name, x, y, z, reading, standard uncertainty. Separated by commas, semicolons or tabs.",
    }),
    button({
      onclick: () => {
        takeOver(draft);
        changed();
        redraw("results", "limits", "decision");
        document.getElementById("add-reading").focus();
      },
    }, "Take over as results and readings")));
}

function mapFields(draft, text, again) {
  const faces = facesWithReadings(draft);
  const own = draft.question.own.calibration;
  const isAsked = faces.includes(own.mapFace);
  if (!faces.length) return null;
  const kind = isAsked && draft.faces[own.mapFace].condition === "flux" ? "flux" : "difference";
  return make("details", { class: "whole", open: isAsked }, make("summary", {}, "A map that is not known"), make("div", { class: "fields" },
    listChoice({
      id: "calibration-mapFace", label: "Map", value: own.mapFace, extraClass: "whole", gone: "none",
      groupsOf: () => [[null, [["", "none"], ...facesWithReadings(draft).map((face) => [face, `readings of face ${faceWords(face)}`])]]],
      hint: "Its entries vary smoothly; what is typed for them is where the search begins.",
      onChange: (value) => {
        own.mapFace = value;
        again("calibration-mapFace");
      },
    }),
    isAsked ? [
      text("mapName", "Name of the map (optional)", { isText: true }), text("typical", "Typical size (optional)", { kind }), text("departure", "Departure from a plane (optional)", { kind }),
    ] : null));
}
