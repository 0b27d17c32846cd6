/** Ready problems to start from: parts of Halden Reach, an invented glass works. */

const held = (value) => ({ condition: "held", value });
const insulated = { condition: "insulated" };

/** @type {{title: string, problem: any, view: any}[]} */
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
    view: { plane: { axis: "z", position: "5", reach: "120" }, edgeGap: "10 um" },
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
];
