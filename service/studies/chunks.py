"""A wave of cases as chunks, and the `evaluate` of a study: what is finished from the store, the rest from the crew."""

from __future__ import annotations

import math
import time
from collections import deque
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, Future, wait
from dataclasses import dataclass

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.studies.chunk_work import ChunkOutcome
from service.studies.crew import Crew, CrewLost, TimeOver, WorkerLost
from service.studies.patience import patiently
from service.studies.store import Study, StudyStore

# A chunk takes about this long: long beside what handing it over takes (2 ms), short beside what a crash may cost.
CHUNK_SECONDS = 0.35
MOST_CASES_A_CHUNK = 512
# A wave is divided among this many workers where its cases are few, as long as chunks stay long beside handing over.
_SHARES = 8
_LEAST_SHARE = 16
# Chunks handed in for each worker: one it computes and one for it to begin with next.
_AHEAD = 2
# How often a study that waits for chunks asks whether it is still wanted.
_ASK_EVERY_SECONDS = 0.2
# A crew out of reach is asked again after this time.
_CREW_RETRY_SECONDS = 1.0
# A worker may be ended for something another one did, so a chunk has a second try before it is taken apart.
_TRIES = 2
# What a study leaves running when it is cancelled may end within this time and is then kept.
_LAST_SECONDS = 1.0

# Raises what ends a study early.
AskOn = Callable[[], None]


class TooManyCases(Exception):
    """The study asks for more cases than one may have."""


def chunk_size_for(seconds_a_case: float) -> int:
    """Cases in a chunk, from how long one takes."""
    return min(MOST_CASES_A_CHUNK, max(1, int(CHUNK_SECONDS / max(seconds_a_case, 1e-9))))


def chunks_of(cases: int, chunk_size: int) -> list[range]:
    """A wave in chunks. They depend on nothing but the two numbers, so that they are the same after a restart."""
    size = min(chunk_size, max(math.ceil(cases / _SHARES), chunk_size // _LEAST_SHARE, 1))
    return [range(first, min(first + size, cases)) for first in range(0, cases, size)]


@dataclass(frozen=True)
class _Piece:
    """Some cases of a chunk that are computed together: all of them, or one when they do not come through together."""

    chunk: range
    cases: range
    tries: int = 0


class DurableEvaluate:
    """The `evaluate` of one attempt of a study. Called again in the same order it goes through what is finished.

    case_seconds: longest time of a case. most_cases: of the whole study. ask_on: asked again and again; what it raises
    ends the evaluation.
    """

    def __init__(
        self,
        study: Study,
        work: bytes,
        store: StudyStore,
        crew: Crew,
        *,
        case_seconds: float,
        most_cases: int,
        ask_on: AskOn,
    ) -> None:
        self._study = study
        self._work = work
        self._store = store
        self._crew = crew
        self._case_seconds = case_seconds
        self._most_cases = most_cases
        self._ask_on = ask_on
        self._waves = 0
        self._cases = 0

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """Results of cases, shape (n_cases, n_numbers). Raises TooManyCases, and what `ask_on` raises."""
        self._cases += len(cases)
        if self._cases > self._most_cases:
            raise TooManyCases(f"The study takes more than {self._most_cases} cases.")
        study_id, wave = self._study.study_id, self._waves
        self._waves += 1
        patiently(self._ask_on, self._store.begin_wave, study_id, wave, cases, accuracy)
        finished = patiently(self._ask_on, self._store.chunks, study_id, wave)
        missing = [chunk for chunk in chunks_of(len(cases), self._study.chunk_size) if chunk.start not in finished]

        def keep(chunk: range, outcome: ChunkOutcome) -> None:
            found = outcome.evaluations
            patiently(self._ask_on, self._store.keep, study_id, wave, chunk.start, found, outcome.seconds)
            finished[chunk.start] = outcome.evaluations

        results = len(self._study.columns.results)
        work = _Round(self._crew, self._work, cases, accuracy, self._case_seconds, results, keep)
        work.run(missing, self._ask_on)
        return _joined([finished[first] for first in sorted(finished)], results)


class _Round:
    """Has the missing chunks of one wave computed. keep: called with each as soon as it is finished."""

    def __init__(
        self,
        crew: Crew,
        work: bytes,
        cases: FloatArray,
        accuracy: float | None,
        case_seconds: float,
        results: int,
        keep: Callable[[range, ChunkOutcome], None],
    ) -> None:
        self._crew = crew
        self._work = work
        self._cases = cases
        self._accuracy = accuracy
        self._case_seconds = case_seconds
        self._results = results
        self._keep = keep
        self._waiting: deque[_Piece] = deque()
        self._running: dict[Future[ChunkOutcome], _Piece] = {}
        self._parts: dict[range, dict[int, ChunkOutcome]] = {}

    def run(self, chunks: list[range], ask_on: AskOn) -> None:
        """Compute chunks until all are finished. Raises what `ask_on` raises, and what a worker raises of itself."""
        self._waiting.extend(_Piece(chunk, chunk) for chunk in chunks)
        try:
            while self._waiting or self._running:
                ask_on()
                self._hand_in()
                self._collect(_ASK_EVERY_SECONDS)
        except BaseException:
            self._collect_last()
            raise
        finally:
            for future in self._running:
                future.cancel()

    def _hand_in(self) -> None:
        room = _AHEAD * self._crew.size - len(self._running)
        for _ in range(min(room, len(self._waiting))):
            piece = self._waiting.popleft()
            cases = self._cases[piece.cases.start : piece.cases.stop]
            seconds = self._case_seconds * len(cases)
            self._running[self._crew.submit(self._work, cases, self._accuracy, seconds)] = piece

    def _collect(self, seconds: float) -> None:
        """Take in what is finished, and wait for that as long as this."""
        is_lost = False
        for future in wait(self._running, timeout=seconds, return_when=FIRST_COMPLETED).done:
            piece = self._running.pop(future)
            try:
                self._take(piece, future.result())
            except CrewLost:
                self._waiting.appendleft(piece)
                is_lost = True
            except TimeOver:
                message = f"The case was not complete after {self._case_seconds:g} s."
                self._take_apart(piece, Failure("time-limit", message))
            except WorkerLost:
                if piece.tries + 1 < _TRIES:
                    self._waiting.appendleft(_Piece(piece.chunk, piece.cases, piece.tries + 1))
                else:
                    message = "The process that computed the case ended, most likely for lack of memory."
                    self._take_apart(piece, Failure("process-lost", message))
        if is_lost:
            time.sleep(_CREW_RETRY_SECONDS)

    def _collect_last(self) -> None:
        """Take in what is finished within a moment, so that stopping a study costs no work that was all but done."""
        end = time.monotonic() + _LAST_SECONDS
        self._waiting.clear()
        while self._running and not self._waiting and time.monotonic() < end:
            self._collect(end - time.monotonic())

    def _take_apart(self, piece: _Piece, failure: Failure) -> None:
        """Compute the cases one by one, so that those that can be are. A single one fails in its place."""
        if len(piece.cases) > 1:
            self._waiting.extendleft(_Piece(piece.chunk, range(case, case + 1)) for case in reversed(piece.cases))
            return
        # The bounds are not missing because they are large: all of the row is unknown.
        nothing = np.full((1, self._results), np.nan)
        self._take(piece, ChunkOutcome(Evaluations(nothing, nothing.copy(), {0: failure}), self._case_seconds))

    def _take(self, piece: _Piece, outcome: ChunkOutcome) -> None:
        parts = self._parts.setdefault(piece.chunk, {})
        parts[piece.cases.start] = outcome
        if sum(len(part.evaluations.values) for part in parts.values()) == len(piece.chunk):
            del self._parts[piece.chunk]
            ordered = [parts[first] for first in sorted(parts)]
            evaluations = _joined([part.evaluations for part in ordered], self._results)
            self._keep(piece.chunk, ChunkOutcome(evaluations, sum(part.seconds for part in ordered)))


def _joined(parts: list[Evaluations], results: int) -> Evaluations:
    """Evaluations of cases one after the other. results: how many each case has."""
    none = np.zeros((0, results))
    failures: dict[int, Failure] = {}
    begin = 0
    for part in parts:
        failures |= {begin + case: failure for case, failure in part.failures.items()}
        begin += len(part.values)
    values = np.concatenate([none, *(part.values for part in parts)])
    return Evaluations(values, np.concatenate([none, *(part.bounds for part in parts)]), failures)
