"""How long the cases of a question take, told before they are computed."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from service.analysis.evaluations import Evaluate, Evaluations, FloatArray
from service.core.errors import Interrupted
from service.core.stopping import go_on
from service.refusals import TooCostly
from service.settings import Settings
from service.translation.analysis import Analysis
from service.translation.cases import evaluator

# How many cases show how long one takes, and how long that may take altogether.
TRIED, TRY_SECONDS = 4, 0.7

# A question is refused whose first cases alone take so many times what a request may, or whose cases would at the most:
# searches come to their end with a fifth of the most they may take, and a machine has its faster and slower moments.
FIRST_BEYOND, MOST_BEYOND = 3.0, 15.0


class _FirstWave(BaseException):
    """Leaves an analysis once it has said which cases it wants first, past whatever it catches."""

    def __init__(self, cases: FloatArray, accuracy: float | None) -> None:
        super().__init__()
        self.cases = cases
        self.accuracy = accuracy


def _first_wave(analysis: Analysis) -> tuple[FloatArray, float | None]:
    """The cases an analysis wants first, and how accurate; none if it wants no case at all."""

    def tell(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        raise _FirstWave(np.array(cases, dtype=float), accuracy)

    try:
        analysis.run(tell)
    except _FirstWave as wave:
        return wave.cases, wave.accuracy
    return np.zeros((0, 0)), None


def seconds_a_case(analysis: Analysis, settings: Settings, keep_going: Callable[[], None]) -> float:
    """How long a case takes, tried with the first that the analysis wants, or as long as one was tried."""
    cases, accuracy = _first_wave(analysis)
    end = time.perf_counter() + TRY_SECONDS

    def in_time() -> None:
        keep_going()
        if time.perf_counter() > end:
            raise Interrupted("The cases take longer than trying them may.")

    evaluate = evaluator(analysis.plan, settings, in_time)
    spent: list[float] = []
    begun = time.thread_time()
    try:
        # One by one, so that those before the time was over count.
        spent.extend(_seconds_of(evaluate, case, accuracy) for case in cases[:TRIED])
    except Interrupted:
        keep_going()
        # On a busy machine the time is over with little done, which does not make a case long.
        spent.append(time.thread_time() - begun - sum(spent))
    # The first one also reads what all have in common; of several it is left out.
    return max(spent[1:] or spent, default=0.0)


def _seconds_of(evaluate: Evaluate, case: FloatArray, accuracy: float | None) -> float:
    """Of the processor, lest a case seem long because the machine is busy at this moment."""
    begun = time.thread_time()
    evaluate(case[np.newaxis], accuracy=accuracy)
    return time.thread_time() - begun


def check_time(analysis: Analysis, settings: Settings) -> None:
    """Raise TooCostly where the cases of a question would take far longer than a client may wait.

    The time that the request as it stands took tells so, and then that of a case, because the first thing that a
    service computes takes longer than what comes after it. Where its solution was kept from before it took less than a
    case does; nothing is refused wrongly for that.
    """
    if not _is_far_beyond(analysis, analysis.prepared.seconds, settings):
        return
    cases, accuracy = _first_wave(analysis)
    evaluate = evaluator(analysis.plan, settings, go_on)
    seconds = max((_seconds_of(evaluate, case, accuracy) for case in cases[:1]), default=0.0)
    if not _is_far_beyond(analysis, seconds, settings):
        return
    raise TooCostly(
        f"The request would take up to {analysis.most_cases} cases of about {seconds:.2g} s each, and at most "
        f"{settings.time_limit_seconds:g} s are allowed while a client waits: send it as a study to POST /v1/studies, "
        "or ask for fewer cases.",
        analysis.most_cases * seconds,
        settings.time_limit_seconds,
    )


def _is_far_beyond(analysis: Analysis, seconds: float, settings: Settings) -> bool:
    limit = settings.time_limit_seconds
    if analysis.most_cases * seconds > MOST_BEYOND * limit:
        return True
    return analysis.most_cases * seconds > FIRST_BEYOND * limit and (
        len(_first_wave(analysis)[0]) * seconds > FIRST_BEYOND * limit
    )
