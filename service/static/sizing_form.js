/** The fields of sizing one number. */

import { choice, field, make, writer } from "./elements.js";
import { listChoice } from "./lists.js";
import { numberText } from "./number_form.js";
import { resultEntries } from "./result_form.js";
import { idOf } from "./typed.js";

/** Beside limits up to five further numbers may be off. */
export const mostNumbers = ({ question }) => (question.own.sizing.aim === "limits" ? 6 : 1);

export const fieldsOfNumber = ({ question }) => (number, id, spoken, changed, again) => {
  const kind = `number-${number.id}`;
  const { texts } = number;
  if (number !== question.numbers[0]) {
    return [
      make("p", { class: "hint whole" }, "May be off: limits have to hold all the same."),
      ...zoneFields(number, id, spoken, changed, again, "zone", texts.zone === "none" ? "even" : texts.zone || "even", [["even", "to either side"], ["sides", "up and down"], ["relative", "in parts of it"]]),
    ];
  }
  return [
    numberText(number, id, spoken, changed, "low", "Look from", { kind }), numberText(number, id, spoken, changed, "high", "to", { kind }),
    choice({
      id: idOf(id, "spread"), label: "First places", spoken, value: texts.spread ?? "",
      options: [["", "evenly spread"], ["logarithmic", "in equal ratios"]], onChange: writer(texts, "spread", changed),
    }),
    numberText(number, id, spoken, changed, "count", "How many (optional)"),
    ...(question.own.sizing.aim === "limits" ? zoneFields(number, id, spoken, changed, again, "off", texts.off ?? "", [["", "is as it is set"], ["even", "to either side"], ["sides", "up and down"]]) : []),
  ];
};

/** How far a number may be off: by which way of telling it, under a key of its texts. */
function zoneFields(number, id, spoken, changed, again, key, zone, options) {
  const kind = `step-${number.id}`;
  const sized = (part, label, more) => numberText(number, id, spoken, changed, part, label, more);
  return [
    choice({
      id: idOf(id, key), label: "Tolerance", spoken, value: zone, options, extraClass: zone === "sides" || !zone ? "whole" : "",
      onChange: (value) => {
        number.texts[key] = value;
        again(idOf(id, key));
      },
    }),
    zone === "even" ? sized("plusMinus", "Plus and minus", { kind }) : null,
    zone === "relative" ? sized("relative", "Part, such as 0.05") : null,
    ...(zone === "sides" ? [sized("plus", "Plus", { kind }), sized("minus", "Minus", { kind })] : []),
  ].filter(Boolean);
}

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
  const most = field({ id: "sizing-most", label: "At most so many cases (optional)", value: own.most, extraClass: "whole", onInput: writer(own, "most", changed) });
  if (own.aim === "limits") {
    return [aim, field({
      id: "sizing-sizes", label: "Sizes that can be had (optional)", value: own.sizes, isText: true, extraClass: "whole",
      hint: "Such as 100; 114; 230 mm. Each is told whether it holds.", onInput: writer(own, "sizes", changed),
    }), most];
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
    most,
  ];
}
