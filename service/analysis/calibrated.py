"""What readings say: estimates, a map, and how they agree."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from service.analysis.evaluations import FloatArray
from service.analysis.smoothing import Resolution
from service.analysis.told_apart import Combination

# Where the root of the rise of the sum of squares at the ends of an interval differs by more than this part from that
# of its parabola the interval is said not to hold.
BENT = 0.15

# Probabilities of the sum of squares below and above which readings are said to contradict the body, or to be better
# than their uncertainties.
CONTRADICTED, TOO_GOOD = 0.05, 0.999


@dataclass(frozen=True, eq=False)
class Estimate:
    """An unknown as the readings have it.

    standard_uncertainty: infinite where the readings do not tell the unknown. low, high: 95 % interval, within the
    range. at: the end of the range the value lies on. told: the readings tell more of it than its range. bent: by what
    part the rise of the sum of squares, as a root, departs from that of a parabola at the ends of the interval; NaN
    where that was not looked at because all is linear. profile: interval that follows the sum of squares; its ends are
    NaN where the search did not settle. shares: parts of the variance that come from each reading, shape (n_readings,);
    shared: from each shared error; what is missing to 1 comes from what was known beforehand and from smoothness.
    """

    name: str
    value: float
    standard_uncertainty: float
    low: float
    high: float
    at: Literal["low", "high"] | None
    told: bool
    bent: float
    profile: tuple[float, float] | None
    shares: FloatArray
    shared: FloatArray

    @property
    def is_bent(self) -> bool:
        """Whether the interval, made for a parabola, is off for want of one."""
        return self.told and self.bent > BENT


@dataclass(frozen=True, eq=False)
class MapEstimate:
    """A map as the readings have it: entries, their standard uncertainties, 95 % interval, shape (n_first, n_second).

    departure: root mean square by which the map is thought to depart from a plane, in its unit. confounded: places of
    unknowns that readings do not tell from it.
    """

    name: str
    values: FloatArray
    standard_uncertainties: FloatArray
    low: FloatArray
    high: FloatArray
    departure: float
    resolution: Resolution
    confounded: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class Rival:
    """Another place where the readings are met about as well: its numbers, shape (n_unknowns,), and sum of squares."""

    numbers: FloatArray
    chi_squared: float


@dataclass(frozen=True, eq=False)
class Calibration:
    """What readings say.

    correlation: of the unknowns, shape (n, n), NaN with one the readings do not tell. values, bounds: all results at
    the solution, with how far off they may be; standard_uncertainties: what that of the unknowns does to them, infinite
    where they follow what is not known. left: reading less result, shape (n_readings,); normalised: in standard
    uncertainties of what is left over, NaN where nothing can be; leverages: part of each reading's variance that the
    fit takes up, 1 for a reading that is followed whatever it says. outliers: places of readings whose misfit one in
    twenty sets of so many would show.
    chi_squared: the sum of squares. degrees_of_freedom: readings and prior values less what they determine; no integer
    with a map. probability: that chi_squared is as large or larger by chance, None where there is nothing left to test
    or the uncertainties were scaled. missed: the ranges keep the readings from being met, though there are no more than
    unknowns. scaled_by: what given uncertainties were multiplied by, 1 if they are taken as
    given. coverage_factor: of the intervals.
    rivals: other minima the readings do not rule out. minima: how many different minima the starts led to. settled: the
    search came to its end. linear: all readings are affine functions of the unknowns. cases: that were computed.
    """

    estimates: tuple[Estimate, ...]
    smooth: MapEstimate | None
    correlation: FloatArray
    together: tuple[Combination, ...]
    values: FloatArray
    bounds: FloatArray
    standard_uncertainties: FloatArray
    left: FloatArray
    normalised: FloatArray
    leverages: FloatArray
    outliers: tuple[int, ...]
    chi_squared: float
    degrees_of_freedom: float
    probability: float | None
    missed: bool
    scaled_by: float
    coverage_factor: float
    rivals: tuple[Rival, ...]
    minima: int
    settled: bool
    linear: bool
    cases: int

    @property
    def consistent(self) -> Literal["yes", "no", "too_well"] | None:
        """Whether the readings agree with the body within their uncertainties; None where that cannot be tested."""
        if self.probability is None:
            return None
        if self.probability < CONTRADICTED:
            return "no"
        return "too_well" if self.probability > TOO_GOOD else "yes"
