/** The fields of sizing one number. */

import { choice, field, writer } from "./elements.js";
import { listChoice } from "./lists.js";
import { numberText } from "./number_form.js";
import { resultEntries } from "./result_form.js";
import { idOf } from "./typed.js";

export const mostNumbers = 1;

export const fieldsOfNumber = () => (number, id, spoken, changed) => {
  const kind = `number-${number.id}`;
  return [
    numberText(number, id, spoken, changed, "low", "Look from", { kind }), numberText(number, id, spoken, changed, "high", "to", { kind }),
    choice({
      id: idOf(id, "spread"), label: "First places", spoken, value: number.texts.spread ?? "",
      options: [["", "evenly spread"], ["logarithmic", "in equal ratios"]], onChange: writer(number.texts, "spread", changed),
    }),
    numberText(number, id, spoken, changed, "count", "How many (optional)"),
  ];
};

export function ownFields(draft, changed, again) {
  const own = draft.question.own.sizing;
  const aim = choice({
    id: "sizing-aim", label: "Wanted", value: own.aim, extraClass: "whole",
    options: [["limits", "all limits hold"], ["target", "a result has a given value"]],
    onChange: (value) => {
      own.aim = value;
      again("sizing-aim");
    },
  });
  if (own.aim === "limits") {
    return [aim, field({
      id: "sizing-sizes", label: "Sizes that can be had (optional)", value: own.sizes, isText: true, extraClass: "whole",
      hint: "Such as 100; 114; 230 mm. Each is told whether it holds.", onInput: writer(own, "sizes", changed),
    })];
  }
  return [
    aim,
    listChoice({
      id: "sizing-result", label: "Result", value: own.result, groupsOf: () => resultEntries(draft), gone: "choose a result",
      onChange: (value) => {
        own.result = value;
        again("sizing-result");
      },
    }),
    field({ id: "sizing-equals", label: "Has to be", value: own.equals, kind: `result-${own.result}`, onInput: writer(own, "equals", changed) }),
  ];
}
