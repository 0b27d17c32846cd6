"""Means of intervals on intervals, against forty digits and against the line's answer to profiles."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest

from service.core.lines.line import PRIMITIVE, Line
from service.core.lines.pairs import Intervals, pair_means
from service.core.lines.places import Places
from service.core.lines.time_response import respond
from service.core.profiles import Profiles

# Touching, overlapping, one inside another, at both ends of a line of length 2, and slivers of a millionth of it.
LOW = np.array([0.0, 0.1, 0.1 + 2e-6, 0.5, 0.5, 1.0, 1.3, 2.0 - 2e-6])
HIGH = np.array([0.1, 0.1 + 2e-6, 0.4, 0.7, 1.0, 1.3, 1.31, 2.0])
INTERVALS = Intervals(LOW, HIGH)


def exact(line: Line, i: int, j: int, time: float) -> float:
    """Mean of interval i over j between insulated or held ends, by mirror images in forty digits."""
    with mpmath.workdps(40):
        scale, root = mpmath.mpf(line.scale), mpmath.sqrt(time)
        a, b, c, d = (mpmath.mpf(float(end)) * scale for end in (LOW[i], HIGH[i], LOW[j], HIGH[j]))

        def twofold(x: mpmath.mpf) -> mpmath.mpf:
            w = abs(x) / (2 * root)
            return abs(x) / 2 + root * (mpmath.exp(-w * w) / mpmath.sqrt(mpmath.pi) - w * mpmath.erfc(w))

        def mean(low: mpmath.mpf, high: mpmath.mpf) -> mpmath.mpf:
            total = twofold(a - high) + twofold(b - low) - twofold(b - high) - twofold(a - low)
            return total / ((b - a) * (d - c))

        at_low, at_high = (1 if film == 0.0 else -1 for film in (line.film_low, line.film_high))
        if not line.has_low_end:
            return float(mean(c, d))
        if line.is_endless:
            return float(mean(c, d) + at_low * mean(-d, -c))
        period = 2 * mpmath.mpf(line.length) * scale
        total = mpmath.mpf(0)
        for n in range(-int(14 * root / period) - 2, int(14 * root / period) + 3):
            total += (at_low * at_high) ** abs(n) * mean(c + n * period, d + n * period)
            total += (at_low * at_high) ** abs(n) * at_low * mean(-d + n * period, -c + n * period)
        return float(total)


@pytest.mark.parametrize(
    "line",
    [
        Line(2.0, 0.7, 0.0, 0.0),
        Line(2.0, 0.7, 0.0, math.inf),
        Line(2.0, 0.7, math.inf, math.inf),
        Line(math.inf, 1.3, 0.0, 0.0),
        Line(math.inf, 1.3, math.inf, 0.0),
        Line(math.inf, 1.3, 0.0, 0.0, begins=-math.inf),
    ],
    ids=["insulated", "insulated and held", "held", "half-line insulated", "half-line held", "without ends"],
)
def test_means_are_exact_to_rounding_at_every_time_and_width(line: Line) -> None:
    times = np.geomspace(1e-16, 1.0, 9)
    means = pair_means(line, INTERVALS, INTERVALS, times)
    for k, time in enumerate(times):
        for i in range(LOW.size):
            for j in range(i + 1):
                # What two intervals as wide as these would show of each other if they were in the same place.
                size = 1.0 / max(line.scale * max(HIGH[i] - LOW[i], HIGH[j] - LOW[j]), 2.0 * math.sqrt(time))
                assert means[i, j, k] == pytest.approx(exact(line, i, j, time), rel=2e-14, abs=2e-14 * size)


@pytest.mark.parametrize("low", [1e-6, 0.3, 50.0, 1e9])
@pytest.mark.parametrize("length", [2.0, math.inf])
def test_means_between_films_are_those_of_the_answer_to_an_even_profile(length: float, low: float) -> None:
    line = Line(length, 0.7, low, 0.0 if length == math.inf else 3.0)
    times = np.geomspace(1e-14, 1.0, 40)
    chosen = Intervals(LOW[[0, 3, 5, 6]], HIGH[[0, 3, 5, 6]])
    means = pair_means(line, INTERVALS, chosen, times)
    for j in range(chosen.low.size):
        knots = np.unique([0.0, chosen.low[j], chosen.high[j], length])
        unit = ((knots[:-1] >= chosen.low[j]) & (knots[1:] <= chosen.high[j])).astype(float)[:, None]
        unit /= chosen.widths[j] * line.scale
        profile = Profiles(knots, unit, unit.copy())
        for i in range(LOW.size):
            # One interval at a time: together a sliver would be a difference of antiderivatives.
            asked = Places(LOW[i : i + 1], PRIMITIVE, HIGH[i : i + 1])
            expected = respond(line, profile, asked, times).total[0, :, 0] / (INTERVALS.widths[i] * line.scale)
            size = 1.0 / np.maximum(line.scale * max(INTERVALS.widths[i], chosen.widths[j]), 2.0 * np.sqrt(times))
            assert (np.abs(means[i, j] - expected) < 1e-12 * size).all()


def test_means_are_symmetric_and_keep_the_amount() -> None:
    line = Line(2.0, 0.7, 0.0, 0.0)
    edges = 1.0 - np.cos(np.linspace(0.0, math.pi, 13))
    tiles = Intervals(edges[:-1], edges[1:])
    means = pair_means(line, tiles, tiles, np.geomspace(1e-12, 1.0, 30))
    assert (means == means.transpose(1, 0, 2)).all()
    # Nothing leaves an insulated line: the amounts on all tiles add up to the unit put on one.
    np.testing.assert_allclose(np.einsum("i,ijt->jt", tiles.widths * line.scale, means), 1.0, rtol=1e-13)


def test_intervals_that_coincide_are_kept_once() -> None:
    some, which = Intervals.unique(np.array([0.5, 0.0, 0.5]), np.array([1.0, 0.2, 1.0]))
    assert some.low.tolist() == [0.0, 0.5]
    assert some.high.tolist() == [0.2, 1.0]
    assert which.tolist() == [1, 0, 1]
