"""What a worker does with a chunk, in a process of this machine or of a cluster.

Nothing of the web is imported here: a worker starts with what a case needs.
"""

from __future__ import annotations

import pickle
import time
from dataclasses import dataclass
from functools import lru_cache

from service import __version__
from service.analysis.evaluations import Evaluate, Evaluations, FloatArray
from service.settings import Settings
from service.translation.cases import CasePlan, evaluator

# Plans a worker keeps ready; the chunks of the running studies come in turns.
_PLANS_KEPT = 8


@dataclass(frozen=True)
class ChunkOutcome:
    """What a worker hands back. seconds: how long it worked."""

    evaluations: Evaluations
    seconds: float


class OtherRelease(Exception):
    """A worker of a cluster runs another release of the service, whose results may differ in the last digits."""


def pack_work(plan: CasePlan, settings: Settings) -> bytes:
    """All that the chunks of one study have in common. The limits go along, so that every worker has the same."""
    return pickle.dumps((__version__, plan, settings))


def evaluate_chunk(work: bytes, cases: FloatArray, accuracy: float | None) -> ChunkOutcome:
    """Results of some cases, shape (n_cases, n_numbers), of a study.

    work: as `pack_work` made it. The results depend on nothing but the arguments, whichever machine computes them.
    Raises OtherRelease.
    """
    begun = time.perf_counter()
    evaluations = _evaluator(work)(cases, accuracy=accuracy)
    return ChunkOutcome(evaluations, time.perf_counter() - begun)


@lru_cache(maxsize=_PLANS_KEPT)
def _evaluator(work: bytes) -> Evaluate:
    # It comes from our own process: over a pipe, or from the scheduler that the settings name.
    release, plan, settings = pickle.loads(work)  # noqa: S301
    if release != __version__:
        raise OtherRelease(f"The study wants workers of release {release}; this one is {__version__}.")
    return evaluator(plan, settings)
