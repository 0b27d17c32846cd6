/** Texts as they are typed, and what they are in a request. */

/** What is known, as it would be typed. */
export const text = (value) => (value === undefined || value === null ? "" : String(value));

/**
 * A typed text as a request wants it: a bare number as a number, all else as a text with its own unit, and
 * nothing for nothing, of which the service says that it is required.
 * @returns {number|string|undefined}
 */
export function quantity(typed) {
  const trimmed = typed.trim().replace(/^[\u2212\u2013]/, "-");
  if (trimmed === "") return undefined;
  const number = /^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/.test(trimmed) ? Number(trimmed) : NaN;
  return Number.isFinite(number) ? number : trimmed;
}

/** In a list nothing cannot be left out. */
export const entry = (typed) => quantity(typed) ?? "";

/** The field of a draft's part; the page's ids are made here alone. */
export const idOf = (...parts) => parts.join("-");
