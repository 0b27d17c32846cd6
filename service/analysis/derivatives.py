"""Derivatives of results by numbers, from values at Chebyshev points around the nominal numbers.

Around p the result is looked at on [p - r, p + r] at 5 Chebyshev points, nested in 9, and the interpolant is
differentiated at p. A number usually takes four cases or eight, and two more close to p that show whether detail finer
than the interval was missed. All numbers share their waves.

What a derivative may be off by has two parts. Truncation is estimated from the coefficients. Rounding is the sum of
|weight| times the bound of each value and holds whatever the values err by within their bounds; see `interpolants`.

Where cases fail on one side (a size at its limit) p is the end of an interval on the other side. Where the looks do not
converge, however small r, both sides are differentiated apart: a kink at p, as the highest potential has where two
places compete, shows as two derivatives that differ; see `varied_number`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
from service.analysis.interpolants import BoolArray
from service.analysis.varied_number import STEP, Centre, Entry, Number, Side, Steps, vary

# The first radius in parts of the number.
RADIUS = 1 / 64

# First radii below and above these parts of the number are of no use, whoever asks: rounding, and another body.
LEAST_RADIUS, MOST_RADIUS = 1e-9, 1 / STEP

# Cases that each number may take, and those that all stubborn ones share beside, enough for a kink.
CASES_EACH, CASES_SHARED = 10, 48

# Accuracy the cases are asked for, in parts of the span of their data.
ACCURACY = 1e-12

_SPENT = Failure("too-many-cases", "All cases that these derivatives may take were used up before it was varied.")


@dataclass(frozen=True)
class Derivatives:
    """First and second derivatives of every result by every number.

    values, bounds: the results with the nominal numbers, shape (n_results,).
    first, second: shape (n_results, n_numbers), in units of result / number and result / number^2; first_error,
    second_error: estimates of how far off these are, infinite where the values have no finite bound. All are NaN for a
    number that could not be varied. below, above: first derivatives on either side, which are `first` except at a kink.
    smooth: no where the result has a kink there, or none was ruled out; then `first` is the mean of both sides, its
    error reaches to either, and `second` is NaN. affine: no bend was seen within the bounds of the values.
    sides: from which side of its nominal each number was varied. radii: by how much at the last look.
    failures: why a number could not be varied, by its place. n_cases: cases that were computed.
    """

    values: FloatArray
    bounds: FloatArray
    first: FloatArray
    first_error: FloatArray
    second: FloatArray
    second_error: FloatArray
    below: FloatArray
    above: FloatArray
    smooth: BoolArray
    affine: BoolArray
    sides: tuple[Side, ...]
    radii: FloatArray
    failures: Mapping[int, Failure]
    n_cases: int


class NominalFailed(Exception):
    """The case with the nominal numbers has no results."""

    def __init__(self, failure: Failure) -> None:
        super().__init__(failure.message)
        self.failure = failure


def most_cases(n_numbers: int) -> int:
    """The most cases that derivatives by so many numbers take; a well-behaved number takes 6 or 10 of these."""
    return 1 + CASES_EACH * n_numbers + CASES_SHARED


def first_radii(nominal: FloatArray, steps: FloatArray) -> FloatArray:
    """By how much each number is varied at first, shape (n_numbers,): a 64th of itself, or its step where it is 0."""
    return np.where(nominal == 0, steps, np.abs(nominal) * RADIUS)


def derivatives(
    evaluate: Evaluate, nominal: FloatArray, radii: FloatArray, *, accuracy: float = ACCURACY
) -> Derivatives:
    """Derivatives at the nominal numbers.

    nominal: shape (n_numbers,), at least one. radii: by how much each number is varied at first, > 0, in the unit of
    the number; see `first_radii`. accuracy: what cases are asked for, in parts of the span of their data.
    Raises NominalFailed if the case with the nominal numbers has no results.
    """
    centre = Centre()
    size = np.abs(nominal)
    radii = np.where(nominal == 0, radii, np.clip(radii, LEAST_RADIUS * size, MOST_RADIUS * size))
    runs = [vary(Number(float(number), float(radius), centre)) for number, radius in zip(nominal, radii, strict=True)]
    entries, n_cases = _in_waves(evaluate, nominal, centre, runs, accuracy)
    has_none = ~np.isfinite(centre.values)

    def columns(part: str) -> FloatArray:
        table = np.stack([getattr(entry, part) for entry in entries], axis=-1)
        if table.dtype == float:
            table[has_none] = np.nan
        return table

    return Derivatives(
        values=centre.values,
        bounds=centre.bounds,
        first=columns("first"),
        first_error=columns("first_error"),
        second=columns("second"),
        second_error=columns("second_error"),
        below=columns("below"),
        above=columns("above"),
        smooth=columns("smooth").astype(bool),
        affine=columns("affine").astype(bool),
        sides=tuple(entry.side for entry in entries),
        radii=np.array([entry.radius for entry in entries]),
        failures={place: entry.failure for place, entry in enumerate(entries) if entry.failure is not None},
        n_cases=n_cases,
    )


def _in_waves(
    evaluate: Evaluate, nominal: FloatArray, centre: Centre, runs: Sequence[Steps], accuracy: float
) -> tuple[list[Entry], int]:
    """What each run of a number returns, and how many cases it took.

    All points that are waited for go into one wave; the first has the nominal case at its head. Numbers that come last
    go without once all cases are used up, and are left with the looks they had.
    """
    wanted = {place: next(run) for place, run in enumerate(runs)}
    entries: dict[int, Entry] = {}
    n_cases = 0
    while wanted:
        head = 1 if n_cases == 0 else 0
        rows: dict[int, slice] = {}
        end = head
        for place, points in wanted.items():
            if n_cases + end + len(points) <= most_cases(len(runs)):
                rows[place] = slice(end, end + len(points))
                end += len(points)
        cases = np.repeat(nominal[None, :], end, axis=0)
        for place, row in rows.items():
            cases[row, place] = wanted[place]
        n_cases += end
        answers = evaluate(cases, accuracy=accuracy) if end else _nothing(0, centre)
        if head:
            if 0 in answers.failures:
                raise NominalFailed(answers.failures[0])
            centre.values, centre.bounds = answers.values[0], answers.bounds[0]
        still: dict[int, FloatArray] = {}
        for place in wanted:
            found = _nothing(len(wanted[place]), centre)
            if place in rows:
                found = answers.part(rows[place].start, rows[place].stop)
            try:
                still[place] = runs[place].send(found)
            except StopIteration as finished:
                entries[place] = finished.value
        wanted = still
    return [entries[place] for place in range(len(runs))], n_cases


def _nothing(n_cases: int, centre: Centre) -> Evaluations:
    """What cases that may not be computed any more give."""
    unknown = np.full((n_cases, len(centre.values)), np.nan)
    return Evaluations(unknown, unknown, dict.fromkeys(range(n_cases), _SPENT))
