/** Calls of the service, and every way they fail as a sentence. */

import { save } from "./elements.js";

/**
 * @typedef {object} Mistake
 * @property {string} pointer place in the request
 * @property {string} detail sentence of the service
 */

/** A call that was not answered as hoped. */
export class Failure extends Error {
  /**
   * @param {string} title what kind of failure
   * @param {string} detail a sentence
   * @param {Mistake[]} mistakes
   * @param {string} code a word of the service for what kind of failure it is
   */
  constructor(title, detail, mistakes = [], code = "") {
    super(detail);
    this.title = title;
    this.mistakes = mistakes;
    this.code = code;
  }
}

/** Where a program outside this page reaches a call. */
export const addressOf = (path) => new URL(path, location.href).href;

/**
 * Ask and return the answer's document.
 * @param {string} path @param {any} request @param {AbortSignal} signal
 * @throws {Failure} with a sentence; an AbortError when the signal was given
 */
export const ask = (path, request, signal) => documentOf(path, {
  method: "POST",
  headers: { "Content-Type": "application/json", Accept: "application/json" },
  body: JSON.stringify(request),
  signal,
});

/** Ask for a document that is there. @param {string} path @throws {Failure} with a sentence */
export const askFor = (path) => documentOf(path, { headers: { Accept: "application/json" } });

async function documentOf(path, asked) {
  let response;
  let body;
  try {
    response = await fetch(path, asked);
    body = await response.json();
  } catch (error) {
    if (asked.signal?.aborted) throw error;
    if (response) {
      throw new Failure(
        "The answer could not be read",
        `The service answered with status ${response.status}, and its answer broke off or is no JSON. Try again.`,
      );
    }
    throw new Failure(
      "The service cannot be reached",
      "No answer came. See that the service is running and that you are connected to it, then compute again; "
        + "what you have typed is kept.",
    );
  }
  if (response.ok) return body;
  const wait = response.headers.get("Retry-After");
  throw new Failure(
    body.title ?? `Status ${response.status}`,
    `${body.detail ?? "The service gave no reason."}${wait ? ` It asks to wait ${wait} s.` : ""}`,
    body.errors ?? [],
    String(body.type ?? "").split(/[/:#]/).at(-1),
  );
}

/** Save another form of an answer, which the service keeps ready. @param {string} mediaType @param {string} name */
export async function saveText(path, request, mediaType, name) {
  const response = await fetch(path, {
    method: "POST",
    headers: { "Content-Type": "application/json", Accept: mediaType },
    body: JSON.stringify(request),
  });
  if (response.ok) save(name, await response.text(), mediaType);
}
