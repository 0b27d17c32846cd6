/** A section through a stack, stretched so that layers of micrometres are seen beside layers of millimetres. */

import { brief } from "./numbers.js";

/** The thinnest layer is drawn at least this part as high as the thickest. */
const THINNEST = 0.3;

/**
 * Heights as they are drawn, from 0 to 1.
 * @param {(import("./plane.js").PlaneData & {name: string, hasContact: boolean})[]} layers from below
 */
export function heightsDrawn(layers) {
  const real = layers.map(({ rows }) => rows.at(-1) - rows[0]);
  const most = Math.max(...real);
  // By its root, so that thicker is still seen to be thicker.
  const drawn = real.map((thickness) => Math.max(Math.sqrt(thickness / most), THINNEST));
  const sum = drawn.reduce((total, thickness) => total + thickness, 0);
  const thicknesses = drawn.map((thickness) => thickness / sum);
  const bottoms = thicknesses.map((_, index) => thicknesses.slice(0, index).reduce((total, thickness) => total + thickness, 0));
  const place = (height, index) => bottoms[index] + ((height - layers[index].rows[0]) / real[index]) * thicknesses[index];
  return {
    thicknesses,
    rows: layers.map(({ rows }, index) => rows.map((height) => place(height, index))),
    /** Where a height is drawn. @param {number} height */
    at(height) {
      const index = layers.findIndex(({ rows }) => height <= rows.at(-1));
      return place(height, index < 0 ? layers.length - 1 : index);
    },
    axis: {
      range: [0, 1], tickmode: "array", tickvals: [...bottoms, 1],
      ticktext: [...layers.map(({ rows }) => brief(rows[0])), brief(layers.at(-1).rows.at(-1))],
    },
    /** Interfaces: a firm line where there is a contact, a fine one where layers are bonded. */
    lines: (of, ink) => bottoms.slice(1).map((y, index) => ({
      type: "line", xref: "paper", x0: 0, x1: 1, y0: y, y1: y,
      line: of[index + 1].hasContact ? { color: ink, width: 2.5 } : { color: ink, width: 0.8, dash: "dot" },
    })),
    names: (of, font) => of.map(({ name }, index) => ({
      text: name.replace(/[<>&]/g, " "), showarrow: false, xref: "paper", x: 0, xanchor: "left", xshift: 5,
      y: bottoms[index] + thicknesses[index] / 2, yanchor: "middle", font: { ...font, size: 12 },
      bgcolor: "rgba(255,254,250,0.8)", borderpad: 1,
    })),
  };
}
