/** Pictures of curves, bars and points, drawn as wide as there is room and again when that changes. */

import { make } from "./elements.js";
import { FONT, INK, plotting } from "./picture.js";

/** Colours of the sheet: the thing itself, what it is held against, what is in favour, what is not. */
export const COLOURS = { main: "#a33b1f", limit: "#1b2730", held: "#1d6138", missed: "#9c1b1b", second: "#0b5a74", quiet: "#7d8789", tint: "#e7c9bb" };
/** Tint of what holds, seen as a band even in grey. */
export const HELD_BAND = "rgba(29, 97, 56, 0.16)";

/** An axis of a picture. @param {string} title @param {any} [more] */
export const axis = (title, more = {}) => ({
  title: { text: plainly(title), font: FONT, standoff: 8 }, tickfont: FONT, zeroline: false, gridcolor: "#e4e2d6", ticks: "outside", ticklen: 5,
  tickcolor: INK, linecolor: INK, showline: true, automargin: true, ...more,
});

/** A text of the user where tags would be read. */
export const plainly = (text) => text.replace(/[<>&]/g, " ");

/** A name beside a bar, in lines that leave room for the bars on a phone. @param {string} text */
export const inLines = (text) => plainly(text).replace(/(.{12,20}?)\s+/g, "$1<br>");

/** A limit across a picture, with its words. */
export const limitLine = (value, words, along = "y") => ({
  shape: { type: "line", line: { color: COLOURS.limit, width: 1.8, dash: "dash" }, ...(along === "y"
    ? { xref: "paper", x0: 0, x1: 1, y0: value, y1: value } : { yref: "paper", y0: 0, y1: 1, x0: value, x1: value }) },
  note: { text: plainly(words), showarrow: false, font: { ...FONT, size: 12 }, bgcolor: "rgba(255,254,250,0.6)", borderpad: 1, ...(along === "y"
    ? { xref: "paper", x: 1, xanchor: "right", y: value, yanchor: "bottom", yshift: 2 } : { yref: "paper", y: 1, yanchor: "top", x: value, xanchor: "left", xshift: 3 }) },
});

/**
 * A figure with a picture and its caption.
 * @param {{label: string, caption?: string, height: number, data: any[], layout: any}} picture
 *   label: what it shows, for those who cannot see it, and where its numbers are
 * @returns {HTMLElement}
 */
export function chart({ label, caption, height, data, layout }) {
  const element = make("div", { class: "chart", role: "img", "aria-label": label, style: `height:${height}px` });
  let width = 0;
  let drawing = Promise.resolve();
  const draw = async () => {
    try {
      const Plotly = await plotting();
      Plotly.purge(element);
      element.replaceChildren();
      await Plotly.newPlot(element, structuredClone(data), {
        width, height, font: FONT, paper_bgcolor: "rgba(0,0,0,0)", plot_bgcolor: "#fffefa", showlegend: false, dragmode: false,
        margin: { l: 20, r: 16, t: 14, b: 20 }, hoverlabel: { bgcolor: "#fffefa", bordercolor: INK, font: FONT },
        legend: { orientation: "h", x: 0, xanchor: "left", y: 1.02, yanchor: "bottom", font: FONT },
        ...structuredClone(layout),
      }, { displayModeBar: false, responsive: false, scrollZoom: false, doubleClick: false });
    } catch {
      element.replaceChildren(make("p", { class: "hint" }, "The picture could not be drawn. Its numbers are in the table."));
    }
  };
  new ResizeObserver(([{ contentRect }]) => {
    const now = Math.floor(contentRect.width);
    if (now < 60 || now === width) return;
    width = now;
    drawing = drawing.then(draw);
  }).observe(element);
  return make("figure", { class: "charted" }, element, caption ? make("figcaption", {}, caption) : null);
}

/** The numbers behind a picture, folded away. */
export const behind = (words, ...tables) => make("details", {}, make("summary", {}, words), ...tables);
