"""Weighted least squares within bounds, from several starts at once.

The Levenberg-Marquardt method with Nielsen's damping (Madsen, Nielsen, Tingleff, Methods for non-linear least squares
problems, 2004, section 3.2) and Marquardt's scaling; each step is a linear problem within bounds (Stark and Parker,
bounded-variable least squares, Computational Statistics 10 (1995) 129). All starts take their steps together, so that
a search of any number of starts takes as many waves as its slowest.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.optimize import lsq_linear

from service.analysis.evaluations import FloatArray
from service.analysis.looks import Look, Looker

# Looks one start may take. A problem worth solving settles in five to ten.
MOST_LOOKS = 20

# A search has settled when the sum of squares could still fall by this part of its unit: it is then a ten-thousandth of
# a standard uncertainty away.
SETTLED = 1e-8

# Damping a search begins with, and above which it has stuck, in parts of the squared length of each column.
FIRST_DAMPING, MOST_DAMPING = 1e-3, 1e12

# What damping is multiplied by after a step that came out as foreseen. A third, as usual, spares rejected steps; a
# tenth spares looks, each of which is a wave.
FALL = 0.1

# Two searches within this many standard uncertainties of each other go on as one.
MET = 1.0

# Rows of a linear problem: what is left over, shape (n_rows,), and its slopes by coordinates, shape (n_rows, size).
Rows = tuple[FloatArray, FloatArray]


@dataclass(eq=False)
class Found:
    """Where a search has come to: the look there, the sum of squares, and whether it settled.

    exact: the slopes are those of the place itself.
    """

    look: Look
    left: FloatArray
    slopes: FloatArray
    exact: bool = True
    settled: bool = False
    damping: float = FIRST_DAMPING
    growth: float = 2.0
    lengths: FloatArray = field(default_factory=lambda: np.zeros(0))

    @property
    def squares(self) -> float:
        """Sum of squares of what is left over."""
        return float(self.left @ self.left)


def fit(
    looker: Looker,
    rows: Callable[[Look], Rows],
    doubts: Callable[[Look], float],
    starts: Sequence[FloatArray],
    unit: Callable[[float], float] = lambda squares: 1.0,
) -> list[Found]:
    """Where the starts lead to, those whose own cases have results; what they leave least over comes first.

    rows: what a look leaves over and its slopes, weighted. doubts: by how much these slopes may be off. unit: of a sum
    of squares, given it, against which it counts as settled.
    """
    searches = [_relaxed(look, looker, rows) for look in looker.look(starts) if look is not None]
    for _ in range(MOST_LOOKS - 1):
        trials = []
        for search in searches:
            if not search.settled:
                step = _step(search, looker, doubts(search.look), unit)
                if step is not None:
                    trials.append((search, step))
        looks = looker.look([search.look.place + step for search, step in trials])
        if not looks:
            break
        for (search, step), look in zip(trials, looks, strict=True):
            _judge(search, step, None if look is None else _relaxed(look, looker, rows))
        searches = _apart(searches, unit)
    return searches


def _apart(searches: list[Found], unit: Callable[[float], float]) -> list[Found]:
    """The searches that are not on their way to where a better one is already, the best first."""
    kept: list[Found] = []
    for search in sorted(searches, key=lambda one: one.squares):
        apart = [float(np.linalg.norm(better.slopes @ (search.look.place - better.look.place))) for better in kept]
        if all(distance > MET * np.sqrt(unit(better.squares)) for distance, better in zip(apart, kept, strict=True)):
            kept.append(search)
    return kept


def bounded_step(left: FloatArray, slopes: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """The step between low and high that makes left + slopes @ step smallest."""
    # A place at a bound may lie beyond it by a rounding.
    low, high = np.minimum(low, 0.0), np.maximum(high, 0.0)
    return lsq_linear(slopes, -left, (low, high), method="bvls", tol=1e-14).x


def _step(search: Found, looker: Looker, doubt: float, unit: Callable[[float], float]) -> FloatArray | None:
    """The next step of a search, None once it has settled or stuck."""
    coordinates, place = looker.coordinates, search.look.place
    low, high = coordinates.low - place, coordinates.high - place
    whole = _damped_step(search, np.full(len(place), doubt), low, high)
    if fall(search.left, search.slopes @ whole) <= SETTLED * unit(search.squares):
        search.settled = search.exact
        return None if search.settled else np.zeros(len(place))
    if search.damping > MOST_DAMPING:
        return None
    lengths = np.linalg.norm(search.slopes, axis=0)
    search.lengths = np.maximum(search.lengths, lengths) if search.lengths.size else lengths
    return _damped_step(search, np.hypot(np.sqrt(search.damping) * search.lengths, doubt), low, high)


def fall(left: FloatArray, change: FloatArray) -> float:
    """By how much the sum of squares falls with a change of what is left over, however large it is."""
    return -float((2 * left + change) @ change)


def _damped_step(search: Found, damping: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """The step that makes what is left over smallest, with what it costs to move each coordinate.

    What slopes may be off by is the least cost: along a direction of which they tell no more nothing moves.
    """
    slopes = np.vstack((search.slopes, np.diag(damping)))
    return bounded_step(np.concatenate((search.left, np.zeros(len(damping)))), slopes, low, high)


def _relaxed(look: Look, looker: Looker, rows: Callable[[Look], Rows]) -> Found:
    """A look with the entries of a map where they leave least over, if results are affine functions of them.

    What they come to there is exact without another case; only slopes by the unknowns are those of the place looked at
    (variable projection: Golub and Pereyra, SIAM Journal on Numerical Analysis 10 (1973) 413). Without it a search goes
    along a bent valley where a map and a conductivity make up for each other.
    """
    left, slopes = rows(look)
    if not looker.affine_entries:
        return Found(look, left, slopes)
    step = np.zeros(len(look.place))
    entries = slice(looker.coordinates.count, None)
    step[entries] = np.linalg.lstsq(slopes[:, entries], -left)[0]
    moved = replace(look, place=look.place + step, values=look.values + look.slopes @ step)
    change = slopes @ step
    return Found(moved, left + change, slopes, exact=float(change @ change) <= SETTLED)


def _judge(search: Found, step: FloatArray, seen: Found | None) -> None:
    """Take a step that lessens the sum of squares, and set the damping by how well that was foreseen."""
    if seen is not None:
        foreseen = fall(search.left, search.slopes @ step)
        gain = fall(search.left, seen.left - search.left) / foreseen if foreseen > 0 else 0.0
        if gain > 0 or not step.any():
            search.look, search.left, search.slopes, search.exact = seen.look, seen.left, seen.slopes, seen.exact
            search.damping *= max(FALL, 1 - (2 * gain - 1) ** 3)
            search.growth = 2.0
            return
    search.damping *= search.growth
    search.growth *= 2
