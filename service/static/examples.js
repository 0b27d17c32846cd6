/** Ready problems to start from: parts of Halden Reach, an invented glass works. */

import { askFor } from "./calls.js";

const held = (value) => ({ condition: "held", value });
const insulated = { condition: "insulated" };

/**
 * Some hold a problem; others name a file among the examples of the calls, with results, limits and a question.
 * @type {{title: string, problem?: any, call?: string, file?: string, view: any}[]}
 */
export const EXAMPLES = [
  {
    title: "Sight-port bar in a cooled frame (bar, heat)",
    problem: {
      name: "Halden Reach, sight-port bar in a cooled frame",
      potential: "temperature",
      units: { length: "mm", potential: "degC", flux: "kW/m^2" },
      body: { size: { x: 40, y: 60, z: "semi-infinite" }, conductivity: { x: 95, y: 95, z: 130 } },
      faces: {
        x_low: held(30),
        x_high: { condition: "film", coefficient: "850 W/(m^2 K)", ambient: 24 },
        y_low: insulated,
        y_high: { condition: "flux", inflow: "1.5 kW/m^2" },
        z_low: held({
          map: "patches",
          background: 30,
          patches: [{ name: "window", x: [5, 35], y: [10, 50], value: 640 }],
        }),
      },
    },
    view: { plane: { axis: "z", position: "5", to: { z: "120" } }, edgeGap: "10 um", reach: { face: "z_low" } },
  },
  {
    title: "Crown brick with a hot spot (block, readings)",
    problem: {
      name: "Halden Reach, crown brick with a hot spot",
      potential: "temperature",
      units: { length: "mm", potential: "degC" },
      body: { size: { x: 230, y: 114, z: 300 }, conductivity: "2.1 W/(m K)" },
      faces: {
        x_low: insulated,
        x_high: insulated,
        y_low: insulated,
        y_high: insulated,
        z_low: held({
          map: "samples",
          csv: "x/y,0,57,114\n0,1480,1492,1485\n115,1496,1540,1501\n230,1483,1494,1488\n",
        }),
        z_high: { condition: "film", coefficient: "14 W/(m^2 K)", ambient: "45 degC" },
      },
    },
    view: { plane: { axis: "y", position: "57" } },
  },
  {
    title: "Crown brick whose cold side glows (block, varying conductivity)",
    problem: {
      name: "Halden Reach, crown brick whose cold side glows",
      potential: "temperature",
      units: { length: "mm", potential: "degC" },
      body: {
        size: { x: 230, y: 114, z: 300 },
        conductivity: "1.4 W/(m K)",
        conductivity_law: { law: "table", potential: [20, 600, 1200, 1600], factor: [1, 1.21, 1.5, 1.71] },
      },
      faces: {
        x_low: insulated,
        x_high: insulated,
        y_low: insulated,
        y_high: insulated,
        z_low: held({
          map: "patches",
          background: 1480,
          patches: [{ name: "hot spot", x: [60, 170], y: [30, 84], value: 1540 }],
        }),
        z_high: { condition: "film", coefficient: "9 W/(m^2 K)", ambient: "45 degC", emissivity: 0.85 },
      },
    },
    view: { plane: { axis: "y", position: "57" } },
  },
  {
    title: "Electrode stub with two clamps (block, voltage)",
    problem: {
      name: "Halden Reach, electrode stub with two clamps",
      potential: "electric_potential",
      units: { length: "mm", potential: "mV", flux: "A/cm^2", flow: "A" },
      body: { size: { x: 80, y: 80, z: 400 }, conductivity: "0.9 MS/m" },
      faces: {
        x_low: insulated,
        x_high: insulated,
        y_low: insulated,
        y_high: insulated,
        z_low: {
          condition: "flux",
          inflow: {
            map: "patches",
            background: 0,
            patches: [
              { name: "left clamp", x: [0, 30], y: [20, 60], value: "25 A/cm^2" },
              { name: "right clamp", x: [50, 80], y: [20, 60], value: "25 A/cm^2" },
            ],
          },
        },
        z_high: { condition: "film", coefficient: "40 S/cm^2", ambient: 0 },
      },
    },
    view: { plane: { axis: "z", position: "5" } },
  },
  {
    title: "Power module of the furnace controls (stack, pads)",
    problem: {
      name: "Halden Reach, power module of the furnace controls",
      potential: "temperature",
      units: { length: "mm", potential: "degC" },
      body: {
        size: { x: 30, y: 20 },
        layers: [
          { name: "base", thickness: 3, conductivity: 390 },
          { name: "solder", thickness: "80 um", conductivity: 57 },
          {
            name: "ceramic", thickness: 0.63, conductivity: { in_plane: 26, through: 24 },
            contact_conductance_below: "400 kW/(m^2 K)",
          },
          { name: "copper", thickness: "20 um", conductivity: 390 },
        ],
      },
      faces: {
        x_low: insulated,
        x_high: insulated,
        y_low: insulated,
        y_high: insulated,
        z_low: { condition: "film", coefficient: "6 kW/(m^2 K)", ambient: 35 },
        z_high: {
          condition: "flux",
          inflow: {
            map: "patches",
            background: 0,
            patches: [
              { name: "valve A", x: [4, 10], y: [4, 9], flow: 30 },
              { name: "valve B", x: [10, 16], y: [4, 9], flow: 30 },
              { name: "driver", x: [24, 30], y: [15, 20], flow: 6 },
            ],
          },
        },
      },
    },
    view: { plane: { axis: "y", position: "6.5" }, accuracy: { kind: "1e-6" } },
  },
  {
    title: "Thermal probes on a floor slab (no sides, pads)",
    problem: {
      name: "Halden Reach, thermal probes on a floor slab",
      potential: "temperature",
      units: { length: "mm", potential: "degC", flow: "mW" },
      body: { size: { x: "infinite", y: "infinite", z: 250 }, conductivity: "1.6 W/(m K)" },
      faces: {
        z_low: held("12 degC"),
        z_high: {
          condition: "flux",
          inflow: {
            map: "patches",
            background: 0,
            patches: [
              { name: "heater", x: [-15, 15], y: [-15, 15], flow: "2.5 W" },
              { name: "near probe", x: [40, 50], y: [-5, 5], flow: 0 },
              { name: "far probe", x: [120, 130], y: [-5, 5], flow: 0 },
            ],
          },
        },
      },
    },
    view: {
      plane: { axis: "z", position: "250", from: { x: "-100", y: "-100" }, to: { x: "200", y: "100" } },
      accuracy: { kind: "1e-6" },
    },
  },
  {
    title: "Bus-bar stub with clamped contacts (block, several conditions)",
    problem: {
      name: "Halden Reach, bus-bar stub with clamped contacts",
      potential: "electric_potential",
      units: { length: "mm", potential: "mV", flow: "A", resistance: "uohm" },
      body: { size: { x: 80, y: 60, z: 25 }, conductivity: "56 MS/m" },
      faces: {
        x_low: insulated,
        x_high: insulated,
        y_low: insulated,
        y_high: insulated,
        z_low: insulated,
        z_high: {
          condition: "mixed",
          background: insulated,
          pads: [
            { name: "clamp A", x: [5, 25], y: [10, 50], condition: "held", value: 0 },
            { name: "clamp B", x: [55, 75], y: [10, 50], condition: "held", flow: 1200 },
            { name: "fuse lug", x: [35, 45], y: [0, 8], condition: "film", coefficient: "4 MS/m^2", ambient: 0 },
          ],
        },
      },
    },
    view: { plane: { axis: "z", position: "25" } },
  },
  { title: "Does the power module hold its limits? (limits)", call: "limits", file: "limits_power_module", view: { plane: { axis: "y", position: "6.5" } } },
  { title: "Crown brick: thicknesses and coolings (table of cases)", call: "cases", file: "cases_crown_brick", view: { plane: { axis: "y", position: "57" } } },
  { title: "A hundred crown bricks (table of cases, as a study)", call: "cases", file: "studies_crown_bricks", view: { plane: { axis: "y", position: "57" } } },
  { title: "Sight port: what matters? (sensitivities)", call: "sensitivities", file: "sensitivities_sight_port", view: { plane: { axis: "z", position: "0" } } },
  { title: "Crown brick as it is made (tolerances)", call: "tolerances", file: "tolerances_crown_brick", view: { plane: { axis: "y", position: "57" } } },
  { title: "Crown brick: how thick? (sizing)", call: "sizing", file: "sizing_crown_brick", view: { plane: { axis: "y", position: "57" } } },
  { title: "Crown brick whatever its tolerances (sizing)", call: "sizing", file: "sizing_crown_brick_tolerances", view: { plane: { axis: "y", position: "57" } } },
  { title: "Cold plate: where do its parts go? (best values)", call: "best-values", file: "best_values_cold_plate", view: { plane: { axis: "z", position: "0" } } },
  { title: "Throat block: film and conductivity from thermocouples (calibration)", call: "calibration", file: "calibration_throat_block", view: { plane: { axis: "y", position: "40" } } },
  { title: "Burner tile: a heat load from probes (calibration of a map)", call: "calibration", file: "calibration_burner_tile", view: { plane: { axis: "z", position: "60" } } },
];

/** The problem of an example, and the request of a decision if it has one. @throws {import("./calls.js").Failure} */
export async function exampleOf({ problem, view, call, file }) {
  if (!file) return { problem, view };
  const { request } = await askFor(`/static/examples/${file}.json`);
  // A study holds its question.
  const asked = request.question ?? request;
  const accuracy = accuracyOf(asked.accuracy);
  return { problem: asked.problem, view: accuracy ? { ...view, accuracy } : view, asked, call };
}

/** The accuracy of a request as the form has it. */
function accuracyOf(accuracy) {
  if (!accuracy) return null;
  return accuracy.absolute === undefined ? { kind: accuracy.relative.toExponential() } : { kind: "absolute", absolute: String(accuracy.absolute) };
}
