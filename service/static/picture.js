/** The plane as a heat map with labelled isotherms, drawn by the plotting script the service brings along. */

import { make } from "./elements.js";
import { bounded, brief, evenStep, pretty } from "./numbers.js";
import { heightsDrawn } from "./section.js";

export const INK = "#1b2730";
export const FONT = { family: "system-ui, 'Liberation Sans', 'DejaVu Sans', sans-serif", size: 13, color: INK };
const HIGHEST_PICTURE = 500;
/** Beyond this a picture with equal axes would be a hairline. */
const LONGEST_RATIO = 10;

/** The plotting script, loaded when the first picture is wanted: the form does without it. @type {Promise<any>|null} */
let loading = null;

/** Plotly once its script has run. @returns {Promise<any>} */
export function plotting() {
  loading ??= new Promise((resolve, reject) => {
    const failed = () => {
      loading = null;
      reject(new Error("no plotting script"));
    };
    const script = make("script", { src: "/static/vendor/plotly.min.js", onload: () => resolve(window.Plotly), onerror: failed });
    document.head.append(script);
  });
  return loading;
}

/** Isotherms at round values. @param {import("./plane.js").PlaneData} plane */
export function levelsOf(plane) {
  const span = plane.highest - plane.lowest;
  // Nothing but rounding and error is left of a uniform plane.
  if (!(span > 4 * plane.bound) || span < 1e-12 * Math.abs(plane.highest)) return null;
  const step = evenStep(span, 10);
  return { step, start: Math.ceil(plane.lowest / step) * step, end: plane.highest };
}

/** @param {import("./plane.js").PlaneData} plane */
export function hasEqualAxes(plane) {
  if (plane.layers) return false;
  const wide = plane.columns.at(-1) - plane.columns[0];
  const high = plane.rows.at(-1) - plane.rows[0];
  return Math.max(wide / high, high / wide) <= LONGEST_RATIO;
}

function sizes(plane, width, isNarrow) {
  const margin = isNarrow ? { l: 52, r: 14, t: 12, b: 124 } : { l: 66, r: 112, t: 14, b: 54 };
  const wide = plane.columns.at(-1) - plane.columns[0];
  const high = plane.rows.at(-1) - plane.rows[0];
  const room = Math.max(180, width - margin.l - margin.r);
  if (!hasEqualAxes(plane)) return { margin, width, height: 320 + margin.t + margin.b };
  const scale = Math.min(room / wide, HIGHEST_PICTURE / high);
  return {
    margin,
    width: Math.round(scale * wide + margin.l + margin.r),
    height: Math.round(Math.max(scale * high, 70) + margin.t + margin.b),
  };
}

/** Data and layout. @param {import("./plane.js").PlaneData} plane */
function figureOf(plane, words, units, marks, width) {
  const isNarrow = width < 560;
  const levels = levelsOf(plane);
  const stops = words.scale.map((colour, index) => [index / (words.scale.length - 1), colour]);
  const bar = { title: { text: `${words.potential}, ${pretty(units.potential)}`, font: FONT }, tickfont: FONT, outlinewidth: 1, outlinecolor: INK };
  const barAt = isNarrow
    ? { orientation: "h", x: 0.5, yref: "container", y: 0, yanchor: "bottom", ypad: 4, thickness: 14, len: 1, xpad: 0, nticks: 6 }
    : { thickness: 16, len: 1, lenmode: "fraction", xpad: 14, ypad: 0 };
  bar.title.side = isNarrow ? "top" : "right";
  // Above a lying bar the title would touch it.
  if (isNarrow) bar.title.text += "<br> ";
  const heights = plane.layers ? heightsDrawn(plane.layers) : null;
  const data = (plane.layers ?? [plane]).flatMap((piece, index) => {
    const places = { x: piece.columns, y: heights ? heights.rows[index] : piece.rows, z: piece.values };
    const heat = {
      type: "heatmap", ...places, zsmooth: "best", colorscale: stops, zmin: plane.lowest, zmax: plane.highest,
      customdata: piece.rows.map((height) => piece.columns.map(() => height)),
      ...(index ? { showscale: false } : { colorbar: { ...bar, ...barAt } }),
      hovertemplate: `${plane.across} = %{x:.5~g} ${pretty(units.length)}<br>${plane.up} = %{customdata:.5~g} ${pretty(units.length)}`
        + `<br><b>%{z:.7~g} ${pretty(units.potential)}</b><extra>${piece.name ?? ""}</extra>`,
    };
    const lines = levels && {
      type: "contour", ...places, autocontour: false, showscale: false, hoverinfo: "skip",
      contours: {
        coloring: "none", showlabels: !heights || heights.thicknesses[index] > 0.25, labelfont: { ...FONT, size: 12 },
        start: levels.start, end: levels.end, size: levels.step,
      },
      line: { color: INK, width: 0.9, smoothing: 0.6 },
    };
    return lines ? [heat, lines] : [heat];
  });
  const axis = (name) => ({
    title: { text: `${name}, ${pretty(units.length)}`, font: FONT, standoff: 8 }, tickfont: FONT, zeroline: false,
    showgrid: false, ticks: "outside", ticklen: 5, tickcolor: INK, linecolor: INK, mirror: true, showline: true,
  });
  const isEqual = hasEqualAxes(plane);
  const layout = {
    ...sizes(plane, width, isNarrow), font: FONT, paper_bgcolor: "rgba(0,0,0,0)", plot_bgcolor: "#fffefa",
    xaxis: { ...axis(plane.across), range: [plane.columns[0], plane.columns.at(-1)], ...(isEqual ? { constrain: "domain" } : {}) },
    yaxis: {
      ...axis(plane.up), range: [plane.rows[0], plane.rows.at(-1)], ...(isEqual ? { scaleanchor: "x", constrain: "domain" } : {}),
      ...(heights ? heights.axis : {}),
    },
    shapes: heights ? heights.lines(plane.layers, INK) : [],
    annotations: heights ? heights.names(plane.layers, FONT) : [],
    hoverlabel: { bgcolor: "#fffefa", bordercolor: INK, font: FONT },
    showlegend: false, dragmode: false,
  };
  const shownMarks = heights ? marks.map((mark) => ({ ...mark, y: heights.at(mark.y) })) : marks;
  return { data: [...data, ...markTraces(shownMarks)], layout };
}

/** Hottest and coldest place by their shape, not by colour. */
function markTraces(marks) {
  return marks.map((mark) => ({
    type: "scatter", mode: "markers", x: [mark.x], y: [mark.y], cliponaxis: false,
    marker: { symbol: mark.symbol, size: 13, color: "#fffefa", line: { color: INK, width: 1.6 } },
    hovertemplate: `${mark.words}<extra></extra>`,
  }));
}

/**
 * Extremes of the body, and of named results, that lie in the plane.
 * @param {import("./plane.js").PlaneData} plane @param {any} extremes of the body @param {any[]} results as they are named
 */
export function marksOf(plane, extremes, results, words) {
  const ofBody = ["highest", "lowest"].map((which) => ({ at: extremes[which].at, words: `${words[which]} of the body`, ...SIGNS[which] }));
  const ofResults = results.filter(({ at }) => at).map(({ at, name }) => ({ at, words: name.replace(/[<>&]/g, " "), ...SIGNS.result }));
  const marks = [...ofBody, ...ofResults].flatMap(({ at, ...mark }) => {
    const place = placeIn(plane, at);
    return place ? [{ ...place, ...mark }] : [];
  });
  // Of several that would cover each other the first is drawn, with the words of all.
  const isNear = (one, other, along) => Math.abs(one - other) <= 0.01 * (along.at(-1) - along[0]);
  const drawn = [];
  for (const mark of marks) {
    const first = drawn.find((other) => isNear(mark.x, other.x, plane.columns) && isNear(mark.y, other.y, plane.rows));
    if (first) first.words += `; ${mark.words}`;
    else drawn.push(mark);
  }
  return drawn;
}

const SIGNS = {
  highest: { symbol: "triangle-up", sign: "\u25b3" }, lowest: { symbol: "triangle-down", sign: "\u25bd" }, result: { symbol: "diamond", sign: "\u25c7" },
};

/** Where a place of the body is in the picture, if it lies in the plane. */
function placeIn(plane, at) {
  const index = { x: 0, y: 1, z: 2 };
  const near = 1e-9 * Math.max(...plane.columns.map(Math.abs), ...plane.rows.map(Math.abs));
  const [along, x, y] = [plane.axis, plane.across, plane.up].map((axis) => at[index[axis]]);
  const isShown = along !== null && x !== null && y !== null && Math.abs(along - plane.position) <= near
    && x <= plane.columns.at(-1) && y <= plane.rows.at(-1);
  return isShown ? { x, y } : null;
}

/** The drawing under way; the next one waits for it. @type {Promise<void>} */
let drawing = Promise.resolve();

/**
 * Draw into an element.
 * @param {HTMLElement} element @param {import("./plane.js").PlaneData} plane
 */
export function drawPicture(element, plane, words, units, marks) {
  const drawn = drawing.then(() => drawAnew(element, plane, words, units, marks));
  drawing = drawn.catch(() => {});
  return drawn;
}

async function drawAnew(element, plane, words, units, marks) {
  const Plotly = await plotting();
  const { data, layout } = figureOf(plane, words, units, marks, element.parentElement.parentElement.clientWidth);
  // The caption is as wide as the picture, so that what stands beside it may come close.
  element.parentElement.style.width = `${layout.width}px`;
  // Changed in place, the script fails where the bar of colours turns.
  Plotly.purge(element);
  element.replaceChildren();
  await Plotly.newPlot(element, data, layout, { displayModeBar: false, responsive: false, scrollZoom: false, doubleClick: false });
}

/** Save as an image that says by itself what it shows. @param {import("./plane.js").PlaneData} plane */
export async function savePicture(plane, words, units, marks, name) {
  const Plotly = await plotting();
  const figure = figureOf(plane, words, units, marks, 900);
  const place = `${plane.axis} = ${brief(plane.position)} ${pretty(units.length)}`;
  figure.layout.title = {
    text: `${name ? `${name.replace(/[<>&]/g, " ")}<br>` : ""}${words.potential} on ${place}, each value within ${bounded(plane.bound)} ${pretty(units.potential_difference)}`,
    font: { ...FONT, size: 14 }, x: 0, xref: "container", xanchor: "left", pad: { l: 12 },
  };
  figure.layout.margin = { ...figure.layout.margin, t: 64 };
  figure.layout.height += 50;
  figure.layout.width = Math.max(figure.layout.width, 620);
  figure.layout.paper_bgcolor = "#ffffff";
  await Plotly.downloadImage(figure, {
    format: "png", scale: 2, width: figure.layout.width, height: figure.layout.height,
    filename: `plane_${plane.axis}_${plane.position}`,
  });
}
