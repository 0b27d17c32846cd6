/** Lengths as they are typed, where the page itself has to reckon with them. */

/** Metres in a unit; lengths in others are left to the service. */
const METRES = {
  nm: 1e-9, um: 1e-6, "µm": 1e-6, mm: 1e-3, cm: 0.01, dm: 0.1, m: 1, km: 1000, in: 0.0254, ft: 0.3048,
};

/**
 * A typed length in a unit, or null where it is none the page can read.
 * @param {string} typed @param {string} unit of bare numbers and of the result
 */
export function lengthIn(typed, unit) {
  const [, number, own] = /^\s*([-\d.eE+]+)\s*(\S*)\s*$/.exec(typed) ?? [];
  const length = own && own !== unit ? Number(number) * (METRES[own] / METRES[unit]) : Number(number);
  return Number.isFinite(length) ? length : null;
}
