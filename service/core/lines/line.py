"""One axis of a body as a line: a rod with a condition at each end.

A field in a box is a product of three such lines in the time form. Distances are taken in the caller's length unit,
where the difference of two given coordinates is exact, and only then scaled by 1 / sqrt(conductivity), which makes
the body isotropic (Carslaw and Jaeger 1959, section 1.20). Everything a line answers is in the scaled length.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# What is asked of a line: the value, the slope, or the antiderivative along the scaled length.
Order = Literal[-1, 0, 1]
SLOPE: Order = -1
VALUE: Order = 0
PRIMITIVE: Order = 1


@dataclass(frozen=True)
class Line:
    """A rod from 0 to `length`, a half-line from 0, or a line without ends.

    length: in the caller's unit, > 0; infinite for a half-line and for a line without ends.
    scale: scaled length per caller's length, 1 / sqrt(conductivity).
    film_low, film_high: H of phi' = H phi (low) and phi' = -H phi (high) per scaled length; 0 insulated or no end
        there, inf held.
    begins: 0, or -infinity for a line without ends.
    data: on an endless line from where to where what drives the body changes along it, in the caller's unit.
    """

    length: float
    scale: float
    film_low: float
    film_high: float
    begins: float = 0.0
    data: tuple[float, float] = (0.0, 0.0)

    @cached_property
    def extent(self) -> float:
        """Scaled length."""
        return self.length * self.scale

    @property
    def is_endless(self) -> bool:
        """Whether the line has no far end."""
        return self.length == math.inf

    @property
    def has_low_end(self) -> bool:
        """Whether the line begins at 0."""
        return self.begins == 0.0

    @property
    def stretch(self) -> tuple[float, float]:
        """The whole of a finite line; of an endless one the part where what drives the body changes."""
        return self.data if self.is_endless else (0.0, self.length)

    @property
    def steepest(self) -> float:
        """Conductance per area from end to end, in the caller's units; 0 of an endless line."""
        return 1 / (self.scale * self.extent)

    @property
    def films_per_extent(self) -> tuple[float, ...]:
        """All films per scaled length, those that are infinite too."""
        return self.film_low, self.film_high

    def from_end(self, coordinates: FloatArray, *, high: bool) -> FloatArray:
        """Scaled distance of places from one end."""
        return (self.length - coordinates) * self.scale if high else coordinates * self.scale

    def between(self, coordinates: FloatArray, others: FloatArray) -> FloatArray:
        """Scaled distance between places."""
        return np.abs(coordinates - others) * self.scale

    def active_breaks(self, profiles: Profiles) -> tuple[FloatArray, NDArray[np.bool_], NDArray[np.bool_]]:
        """Knots, and which of them send out a jump and which a kink as time begins, shape (n_breaks,) each."""
        return active_breaks(self, profiles)

    def largest_jump(self, profiles: Profiles) -> FloatArray:
        """Largest jump of each profile, shape (n_profiles,)."""
        return breaks_of(self, profiles).largest_jump

    def narrowest(self, profiles: Profiles) -> float:
        """Scaled width of the narrowest piece of profiles that is not zero."""
        return profiles.narrowest * self.scale

    def mean(self, drive: Drive) -> FloatArray:
        """What a line that loses nothing comes to, shape (n_columns,)."""
        if isinstance(drive, WallDrive):
            return np.ones(1) / self.extent
        return drive.integrals(np.zeros(1), np.array([self.length]))[0] / self.length

    @property
    def biot_numbers(self) -> tuple[float, float]:
        """H times the scaled length at both ends; of a finite line."""
        return self.film_low * self.extent, self.film_high * self.extent

    @property
    def keeps_its_mean(self) -> bool:
        """Whether nothing leaves the line at either end."""
        return self.film_low == 0.0 and self.film_high == 0.0 and not self.is_endless


@dataclass(frozen=True)
class WallDrive:
    """A line driven at one end with a unit of its data: 1 if held, ambient 1 behind a film, inflow 1 if insulated.

    An inflow counts as potential per scaled length.
    """

    high: bool


Drive = Profiles | WallDrive


def wall_distance(line: Line, coordinates: FloatArray, *, high: bool) -> FloatArray:
    """Scaled distance of places from one end."""
    return line.from_end(coordinates, high=high)


@dataclass(frozen=True, eq=False)
class Breaks:
    """Knots with the jumps of value and of slope that profiles, zero outside their line, have there.

    knots: in the caller's unit, shape (n_breaks,). jumps, slope_jumps: per scaled length, (n_breaks, n_profiles).
    has_slopes: whether any slope jumps. largest_jump: shape (n_profiles,), of curved profiles their size. On an endless
    line the last piece ends nowhere and has no last break, on one without ends the first piece has no first break
    either.
    """

    knots: FloatArray
    jumps: FloatArray
    slope_jumps: FloatArray
    has_slopes: bool
    largest_jump: FloatArray


@lru_cache(maxsize=1024)
def breaks_of(line: Line, profiles: Profiles) -> Breaks:
    """The breaks of profiles on a line."""
    nothing = np.zeros((1, profiles.n_profiles))
    jumps = np.vstack([profiles.left, nothing]) - np.vstack([nothing, profiles.right])
    along = profiles.derivative(1) if profiles.is_curved else None
    left, right = (profiles.slopes, profiles.slopes) if along is None else (along.left, along.right)
    slope_jumps = np.vstack([left / line.scale, nothing]) - np.vstack([nothing, right / line.scale])
    knots = np.minimum(profiles.knots, line.length)
    if line.is_endless:
        there = slice(0 if line.has_low_end else 1, -1)
        knots, jumps, slope_jumps = knots[there], jumps[there], slope_jumps[there]
    largest = profiles.sizes.max(axis=0) if profiles.is_curved else np.abs(jumps).max(axis=0, initial=0.0)
    return Breaks(knots, jumps, slope_jumps, bool(slope_jumps.any()), largest)


def active_breaks(line: Line, profiles: Profiles) -> tuple[FloatArray, NDArray[np.bool_], NDArray[np.bool_]]:
    """Knots, and which of them send out a jump and which a kink as time begins, shape (n_breaks,) each.

    An insulated end mirrors the profile and sends out nothing but a slope; behind a film the profile begins to
    change as sqrt(t), like a kink.
    """
    breaks = breaks_of(line, profiles)
    has_jump, has_kink = np.array(breaks.jumps.any(axis=1)), np.array(breaks.slope_jumps.any(axis=1))
    ends = [(0, line.film_low), (-1, line.film_high)]
    for index, film in ends[0 if line.has_low_end else 1 : 1 if line.is_endless else 2]:
        has_kink[index] |= has_jump[index] and 0.0 < film < math.inf
        has_jump[index] &= film == math.inf
    return breaks.knots, has_jump, has_kink
