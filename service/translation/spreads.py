"""Tolerance zones and distributions of numbers, and how numbers go together, read from a request."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis import distributions
from service.analysis.distributions import Distribution, is_correlation_matrix
from service.analysis.evaluations import FloatArray
from service.models import tolerances as models
from service.refusals import Path
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo
from service.translation.result_units import Measure

# A lognormal number may have a standard deviation of this many times its mean.
WIDEST_LOGNORMAL = 1000.0


@dataclass(frozen=True)
class Spread:
    """How a number may lie: from nominal - minus to nominal + plus, and its distribution."""

    plus: float
    minus: float
    distribution: Distribution


def read_spread(collector: Collector, asked: models.TolerancedNumber, info: NumberInfo, path: Path) -> Spread | None:
    """The spread of a number; None, and noted, where it is none. path: of the number in the request."""
    noted = len(collector.issues)
    spread = _Reading(collector, asked, info, path).read()
    return None if len(collector.issues) > noted else spread


def read_correlation(
    collector: Collector, asked: Sequence[models.Correlation], infos: Sequence[NumberInfo]
) -> FloatArray | None:
    """The correlation matrix of all numbers, shape (n_numbers, n_numbers); None if they are independent."""
    place_of: Mapping[str, int] = {info.name: place for place, info in enumerate(infos)}
    matrix = np.eye(len(infos))
    given: set[frozenset[str]] = set()
    for index, pair in enumerate(asked):
        here: Path = ("correlations", index, "numbers")
        unknown = [name for name in pair.numbers if name not in place_of]
        for name in unknown:
            collector.add(here, f'There is no number "{name}".', "no-such-number")
        if unknown:
            continue
        both = frozenset(pair.numbers)
        if len(both) < 2:
            collector.add(here, "A number goes with itself; name two of them.", "same-number")
        elif both in given:
            collector.add(here, "The correlation of these two is given already.", "twice")
        else:
            given.add(both)
            first, second = (place_of[name] for name in pair.numbers)
            matrix[first, second] = matrix[second, first] = pair.coefficient
    if not asked:
        return None
    if not is_correlation_matrix(matrix):
        detail = (
            "No numbers can have these correlations together: some combination of them would have a negative variance."
        )
        collector.add(("correlations",), detail, "not-positive")
    return matrix


class _Reading:
    """Reads the spread of one number."""

    def __init__(self, collector: Collector, asked: models.TolerancedNumber, info: NumberInfo, path: Path) -> None:
        self._collector = collector
        self._asked = asked
        self._info = info
        self._path = path
        self._shape = asked.distribution or models.Normal(shape="normal")

    def read(self) -> Spread | None:
        noted = len(self._collector.issues)
        if isinstance(self._shape, models.Quantiles):
            return self._by_quantiles(self._shape)
        deviation = self._deviation()
        zone = self._zone()
        if zone is None:
            if deviation is None:
                return None
            half = deviation * getattr(self._shape, "sigmas", 0.0)
            zone = half, half
        plus, minus = zone
        if len(self._collector.issues) > noted:
            return None
        if plus + minus == 0:
            self._refuse((), "The tolerance is zero; leave the number out, or give it one.", "zero")
            return None
        if deviation is None:
            deviation = (plus + minus) / 2 / getattr(self._shape, "sigmas", 1.0)
        return self._of_shape(plus, minus, deviation)

    def _of_shape(self, plus: float, minus: float, deviation: float) -> Spread | None:
        nominal = self._info.nominal
        low, high = nominal - minus, nominal + plus
        if not low < high:
            self._refuse((), "The tolerance is too small to be told from the number.", "too-small")
            return None
        middle = nominal + (plus - minus) / 2
        distribution: Distribution
        if isinstance(self._shape, models.Normal):
            distribution = distributions.normal(middle, deviation)
        elif isinstance(self._shape, models.TruncatedNormal):
            distribution = distributions.truncated_normal(middle, deviation, low, high)
        elif isinstance(self._shape, models.Uniform):
            distribution = distributions.uniform(low, high)
        elif isinstance(self._shape, models.Triangular):
            distribution = distributions.triangular(low, nominal, high)
        else:
            if nominal <= 0 or not self._info.measure.has_own_zero:
                detail = "A lognormal number has to be greater than zero, on a scale with a zero of its own."
                self._refuse(("distribution",), detail, "not-positive")
                return None
            if deviation > WIDEST_LOGNORMAL * nominal:
                detail = f"The standard deviation is more than {WIDEST_LOGNORMAL:g} times the number."
                self._refuse(("distribution",), detail, "too-wide")
                return None
            distribution = distributions.lognormal(nominal, deviation)
        return Spread(plus, minus, distribution)

    def _by_quantiles(self, shape: models.Quantiles) -> Spread | None:
        values = np.array(
            [
                read_measured(self._collector, self._info.measure, value, self._at("distribution", "values", index))
                for index, value in enumerate(shape.values)
            ]
        )
        if np.any(np.diff(values) <= 0):
            self._refuse(("distribution", "values"), "The values have to rise.", "order")
            return None
        nominal = self._info.nominal
        zone = self._zone()
        if zone is None:
            if not values[0] <= nominal <= values[-1]:
                detail = "The nominal value lies outside of the quantiles; give a tolerance beside them."
                self._refuse(("distribution", "values"), detail, "outside")
                return None
            zone = values[-1] - nominal, nominal - values[0]
        return Spread(float(zone[0]), float(zone[1]), distributions.tabulated(values, np.array(shape.probabilities)))

    def _zone(self) -> tuple[float, float] | None:
        """Plus and minus as given; None where no zone is."""
        asked = self._asked
        if asked.plus_minus is not None:
            half = self._not_negative(asked.plus_minus, "plus_minus")
            return half, half
        if asked.relative is not None:
            if asked.relative < 0:
                self._refuse(("relative",), "The tolerance must not be negative.", "negative")
            elif not self._info.measure.has_own_zero:
                detail = "A part of a level that counts from no zero of its own has no meaning; use `plus_minus`."
                self._refuse(("relative",), detail, "no-zero")
            half = asked.relative * abs(self._info.nominal)
            return half, half
        if asked.plus is None and asked.minus is None:
            return None
        plus, minus = (
            0.0 if value is None else self._not_negative(value, name)
            for value, name in ((asked.plus, "plus"), (asked.minus, "minus"))
        )
        return plus, minus

    def _deviation(self) -> float | None:
        """The standard deviation as given; None where none is."""
        given = getattr(self._shape, "standard_deviation", None)
        if given is None:
            return None
        place = ("distribution", "standard_deviation")
        number = read_measured(self._collector, self._step, given, self._at(*place))
        if number <= 0:
            self._refuse(place, "The standard deviation has to be greater than zero.", "not-positive")
        return number

    def _not_negative(self, value: float | str, name: str) -> float:
        number = read_measured(self._collector, self._step, value, self._at(name))
        if number < 0:
            self._refuse((name,), "The tolerance must not be negative.", "negative")
        return number

    @property
    def _step(self) -> Measure:
        return self._info.measure.step

    def _at(self, *place: str | int) -> Path:
        return (*self._path, *place)

    def _refuse(self, place: Path, detail: str, code: str) -> None:
        self._collector.add((*self._path, *place), detail, code)
