/** Numbers as people read them: no digit that the bound does not cover, and bounds never rounded down. */

const MOST_DIGITS = 8;

/** A minus sign that lines up and is read as one. */
const tidy = (text) => text.replace(/e\+?(-?)0*(\d)/, "e$1$2").replace(/-/g, "\u2212");

/**
 * A value with the digits its bound covers, eight at most.
 * @param {number} value @param {number} [bound] of the same unit
 */
export function shown(value, bound = 0) {
  if (value === 0) return "0";
  const size = Math.floor(Math.log10(Math.abs(value)));
  // The last digit shown stands for no less than the bound.
  const covered = bound > 0 ? size - Math.ceil(Math.log10(bound)) + 1 : MOST_DIGITS;
  const digits = Math.min(MOST_DIGITS, covered);
  if (digits < 1) return "0";
  if (size >= 7 || size < -4) return tidy(value.toExponential(digits - 1));
  const text = value.toFixed(Math.max(0, digits - 1 - size));
  // Zeros at the end of an exact value say nothing.
  return tidy(bound > 0 ? text : String(Number(text)));
}

/** A bound to two digits, rounded up. @param {number} bound */
export function bounded(bound) {
  if (!(bound > 0)) return "0";
  const size = Math.floor(Math.log10(bound));
  const unit = 10 ** (size - 1);
  // The little less keeps 2.0 from becoming 2.1 by a rounding of the division.
  const up = Math.ceil(bound / unit - 1e-9) * unit;
  if (size >= 5 || size < -3) return tidy(up.toExponential(1));
  return tidy(up.toFixed(Math.max(0, 1 - size)));
}

/** A remainder of which only the size matters, to two digits. @param {number} value */
export const rough = (value) => `${value < 0 ? "\u2212" : ""}${bounded(Math.abs(value))}`;

/** A few digits, for axes, labels and captions. @param {number} value */
export const brief = (value) => tidy(String(Number(value.toPrecision(6))));

/** A place along an axis, where what rounding left of zero is zero. @param {number} scale the greatest length around */
export const placed = (place, scale) => brief(withoutRounding(place, scale));

/** @param {number} length @param {number} scale the greatest length around */
export const withoutRounding = (length, scale) => (Math.abs(length) <= 1e-12 * scale ? 0 : length);

/** The size of the greatest of some numbers, those left open aside. @param {(number|null)[]} numbers */
export const greatest = (numbers) => numbers.reduce((most, number) => Math.max(most, Math.abs(number ?? 0)), 0);

/** A whole number with thin spaces between thousands. */
export const counted = (count) => String(count).replace(/\B(?=(\d{3})+$)/g, "\u202f");

/** A unit as it is printed: °C, W/(m² K). @param {string} unit */
export const pretty = (unit) => unit
  .replace(/\bdelta_deg/g, "\u00b0").replace(/\bdeg(?=[CF]\b)/g, "\u00b0").replace(/\bu(?=m\b|ohm\b)/g, "\u00b5")
  .replace(/(?<![a-z])([kMm\u00b5]?)ohm\b/g, "$1\u03a9")
  .replace(/\^(-?[1-4])/g, (_, power) => [...power].map((sign) => POWERS[sign]).join(""));
const POWERS = { "-": "\u207b", 1: "\u00b9", 2: "\u00b2", 3: "\u00b3", 4: "\u2074" };

/** A quantity of a request as it is printed: "850 W/(m² K)". @param {number|string} value */
export const written = (value, unit) => (typeof value === "number" ? `${brief(value)} ${pretty(unit)}` : pretty(value));

/** A step of 1, 2, 2.5 or 5 times a power of ten that cuts a span into about this many parts. */
export function evenStep(span, parts) {
  const rough = span / parts;
  const power = 10 ** Math.floor(Math.log10(rough));
  return [1, 2, 2.5, 5, 10].map((part) => part * power).find((step) => step >= rough * 0.999);
}

/** Values at or above 1: as "1 part in 2.6 million". @param {number} ratio */
export function partsIn(ratio) {
  const words = [[1e12, "million million"], [1e9, "thousand million"], [1e6, "million"], [1e3, "thousand"]];
  for (const [size, word] of words) {
    if (ratio >= size) return `1 part in ${Number((Math.floor((ratio / size) * 10) / 10).toPrecision(3))} ${word}`;
  }
  return `1 part in ${Math.floor(ratio)}`;
}
