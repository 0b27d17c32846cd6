/** The question what each number does to each result, as a request wants it. */

import { referencesOf } from "./number_draft.js";

export const textsOf = () => ({});
export const ownOf = () => ({});

/** Part of a request, each place of which is noted with its field. */
export function requestOf(draft, limits, note) {
  const { numbers } = draft.question;
  return { numbers: referencesOf(draft, numbers, numbers.map((_, index) => `#/numbers/${index}`), note, () => ({})) };
}
