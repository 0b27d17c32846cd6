/** What each potential calls its quantities, its default units, and where the faces are. */

/** @typedef {"x"|"y"|"z"} Axis */
/** @typedef {"x_low"|"x_high"|"y_low"|"y_high"|"z_low"|"z_high"} Face */
/** @typedef {"held"|"flux"|"film"|"insulated"|"mixed"} Condition */

/** @type {Axis[]} */
export const AXES = ["x", "y", "z"];
/** @type {Face[]} */
export const FACES = ["x_low", "x_high", "y_low", "y_high", "z_low", "z_high"];

export const LENGTH_UNITS = ["um", "mm", "cm", "m", "km", "in", "ft"];
/**
 * Words of each potential. `scale` runs from low to high and darkens all the way, so that it also reads in
 * grey; isotherms are drawn in ink on it.
 */
export const PHYSICS = {
  temperature: {
    name: "Temperature",
    subject: "heat",
    potential: "Temperature",
    conductivity: "Thermal conductivity",
    film: "Film coefficient",
    ambient: "Surroundings",
    inflow: "Heat flux inwards",
    density: "Heat generated per volume",
    flow: "Heat flow",
    highest: "Hottest place",
    lowest: "Coldest place",
    line: "isotherm",
    units: {
      potential: "degC", conductivity: "W/(m K)", film_coefficient: "W/(m^2 K)", flux: "W/m^2",
      density: "W/m^3", flow: "W", resistance: "K/W",
    },
    difference: "K",
    scale: ["#e3eff4", "#f6e2b3", "#f2b679", "#e27f58"],
  },
  electric_potential: {
    name: "Voltage",
    subject: "current",
    potential: "Voltage",
    conductivity: "Electrical conductivity",
    film: "Contact conductance per area",
    ambient: "Surroundings",
    inflow: "Current inwards",
    density: "Current fed in per volume",
    flow: "Current",
    highest: "Highest voltage",
    lowest: "Lowest voltage",
    line: "equipotential",
    units: {
      potential: "V", conductivity: "S/m", film_coefficient: "S/m^2", flux: "A/m^2", density: "A/m^3",
      flow: "A", resistance: "ohm",
    },
    difference: "V",
    scale: ["#f2efe4", "#dcd7ea", "#bfb1de", "#a390d2"],
  },
  concentration: {
    name: "Concentration",
    subject: "substance",
    potential: "Concentration",
    conductivity: "Diffusivity",
    film: "Film velocity",
    ambient: "Surroundings",
    inflow: "Flux inwards",
    density: "Substance generated per volume",
    flow: "Rate of transport",
    highest: "Highest concentration",
    lowest: "Lowest concentration",
    line: "line of equal concentration",
    units: {
      potential: "mol/m^3", conductivity: "m^2/s", film_coefficient: "m/s", flux: "mol/(m^2 s)",
      density: "mol/(m^3 s)", flow: "mol/s", resistance: "s/m^3",
    },
    difference: "mol/m^3",
    scale: ["#f4f1e3", "#d8e6c3", "#a5cf9b", "#62a67c"],
  },
  hydraulic_head: {
    name: "Hydraulic head",
    subject: "water",
    potential: "Head",
    conductivity: "Hydraulic conductivity",
    film: "Leakance",
    ambient: "Surroundings",
    inflow: "Seepage inwards",
    density: "Recharge per volume",
    flow: "Discharge",
    highest: "Highest head",
    lowest: "Lowest head",
    line: "line of equal head",
    units: {
      potential: "m", conductivity: "m/s", film_coefficient: "1/s", flux: "m/s", density: "1/s",
      flow: "m^3/s", resistance: "s/m^2",
    },
    difference: "m",
    scale: ["#f4f0e2", "#cfe4ea", "#9ac8df", "#6ea8d1"],
  },
};

export const UNIT_LABELS = {
  length: "Lengths", potential: "Potential", conductivity: "Conductivities",
  film_coefficient: "Film coefficients", flux: "Flows per area", density: "Generation per volume",
  flow: "Total flows", resistance: "Resistances between pads",
};

const LYING = { x_low: "front", x_high: "back", y_low: "bottom", y_high: "top", z_low: "left end", z_high: "right end" };
const STANDING = { x_low: "left", x_high: "right", y_low: "front", y_high: "back", z_low: "bottom", z_high: "top" };

/** Where each face is in the sketch: a stack stands on its first layer, any other body lies along z. */
export const placesOf = (isStack) => (isStack ? STANDING : LYING);

export const CONDITIONS = {
  held: "held at a value",
  flux: "given inflow",
  film: "film to surroundings",
  insulated: "insulated",
  mixed: "several conditions",
};

/** @param {Face} face @returns {Axis} */
export const axisOf = (face) => /** @type {Axis} */ (face[0]);

/** The two axes of a face or plane square to an axis. @param {Axis} axis @returns {Axis[]} */
export const axesAcross = (axis) => AXES.filter((other) => other !== axis);

/** Where a face lies: "x = 0" or "x = 40 mm". */
export function placeOf(face, size, unit) {
  const axis = axisOf(face);
  if (face.endsWith("_low")) return `${axis} = 0`;
  const length = size[axis].trim();
  if (!length) return `${axis} = size`;
  return `${axis} = ${Number.isFinite(Number(length)) ? `${length} ${unit}` : length}`;
}

/** One over a unit, as it is usually written: "m^2 K/W" for "W/(m^2 K)". */
export function inverseOf(unit) {
  const [, over, under] = /^([^/]+)\/\(?([^/()]+)\)?$/.exec(unit.trim()) ?? [];
  if (!over) return /^\w+$/.test(unit.trim()) ? `1/${unit.trim()}` : `1/(${unit.trim()})`;
  return over.trim() === "1" ? under : `${under}/${/[\s*]/.test(over.trim()) ? `(${over.trim()})` : over.trim()}`;
}

/** The unit of differences of a potential in a unit. */
export function differenceUnit(draft) {
  const unit = draft.units.potential;
  return { degC: "K", "°C": "K", degF: "delta_degF", "°F": "delta_degF" }[unit] ?? unit;
}
