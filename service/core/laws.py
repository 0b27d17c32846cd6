"""What varies with the potential: a factor on the conductivity, and radiation from a face.

The conductivity along every axis is its given value times f(u), the same f along all. Kirchhoff's transformation

    theta(u) = integral of f from the reference to u

makes div(k f(u) grad u) + g = 0 the equation div(k grad theta) + g = 0 of a constant conductivity, with the flux
-k grad theta (Kirchhoff 1894; Carslaw and Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, section 1.6). f is
piecewise linear, so theta is piecewise quadratic and its inverse a square root: both are exact.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.core.errors import NotPhysical

FloatArray = NDArray[np.float64]

# A linear law is taken to hold down to this factor; below it the potential follows the flows without limit.
LEAST_FACTOR = 1e-3

# Factors that a law may have where there are data; beyond them theta keeps no digits.
SMALLEST_FACTOR, LARGEST_FACTOR = 1e-15, 1e15

# Slopes of a law are the same when they differ by no more than this part of the steepest, which is their rounding.
SAME_SLOPE = 4e-15


@dataclass(frozen=True)
class ConductivityLaw:
    """The factor f(u) on the conductivity, linear between nodes. Build one with `linear` or `table`.

    nodes, factors: places on the scale of the potential, increasing, and the factor at each, > 0.
    slopes: of the factor below the first node and above the last, where the law goes on or is continued: beyond its
        range the solver goes on with the last factor until it knows where the body leaves the range.
    low, high: the range of the potential in which the law holds; infinite where it has no end.
    """

    nodes: tuple[float, ...]
    factors: tuple[float, ...]
    slopes: tuple[float, float]
    low: float
    high: float

    @classmethod
    def constant(cls) -> ConductivityLaw:
        """f = 1 everywhere."""
        return cls((0.0,), (1.0,), (0.0, 0.0), -math.inf, math.inf)

    @classmethod
    def linear(cls, reference: float, per_degree: float) -> ConductivityLaw:
        """f = 1 + per_degree (u - reference), which holds as far as f is at least LEAST_FACTOR."""
        if not (math.isfinite(reference) and math.isfinite(per_degree)):
            raise NotPhysical("The numbers of the conductivity law have to be finite.", ("law",))
        if per_degree == 0.0:
            return cls.constant()
        end = reference - (1.0 - LEAST_FACTOR) / per_degree
        if end == reference:
            raise NotPhysical(
                f"The factor of the conductivity law changes by {per_degree:g} for each unit of potential, so that it "
                f"is above zero on one side of {reference:g} only; give a slope of which a body can make use.",
                ("law", "per_degree"),
            )
        if per_degree > 0.0:
            return cls((end, reference), (LEAST_FACTOR, 1.0), (0.0, per_degree), end, math.inf)
        return cls((reference, end), (1.0, LEAST_FACTOR), (per_degree, 0.0), -math.inf, end)

    @classmethod
    def table(cls, potentials: Sequence[float], factors: Sequence[float]) -> ConductivityLaw:
        """Linear between the entries of a table, which has to cover every potential in the body.

        Raises NotPhysical unless there are two entries or more, the potentials increase and the factors are > 0.
        """
        if len(potentials) != len(factors) or len(potentials) < 2:
            raise NotPhysical(
                f"The table of the conductivity law has {len(potentials)} potentials and {len(factors)} factors; it "
                "needs as many of both, and two at least.",
                ("law",),
            )
        if not all(math.isfinite(number) for number in (*potentials, *factors)):
            raise NotPhysical("The numbers of the conductivity law have to be finite.", ("law",))
        if any(after <= before for before, after in pairwise(potentials)):
            raise NotPhysical("The potentials of the conductivity law have to increase.", ("law", "potential"))
        for index, factor in enumerate(factors):
            if factor <= 0.0:
                raise NotPhysical(
                    f"The factor of the conductivity law is {factor:g}; it has to be greater than zero.",
                    ("law", "factor", index),
                )
        return cls(tuple(potentials), tuple(factors), (0.0, 0.0), potentials[0], potentials[-1])


@dataclass(frozen=True)
class Radiation:
    """Radiation of a film face to black surroundings at the ambient of the film.

    The inflow is coefficient * ((ambient + zero)^4 - (potential + zero)^4) beside that of the film.
    coefficient: emissivity times the Stefan-Boltzmann constant, in units that fit the body's, > 0.
    zero: what makes the potential an absolute temperature when added, such as 273.15 for degrees Celsius.
    """

    coefficient: float
    zero: float


class Kirchhoff:
    """The transformation of a law, with theta = 0 at a reference level."""

    def __init__(self, law: ConductivityLaw, reference: float) -> None:
        self.law = law
        self.reference = reference
        nodes, factors, slopes = np.array(law.nodes), np.array(law.factors), np.array(law.slopes)
        inner = np.diff(factors) / np.diff(nodes)
        self._slopes = np.concatenate([slopes[:1], inner, slopes[1:]])
        if reference not in law.nodes:
            # The reference becomes a node, from which all is counted: at it, theta is zero exactly.
            at = int(np.searchsorted(nodes, reference))
            factor = self._from_node(reference, nodes, factors, at)
            nodes, factors = np.insert(nodes, at, reference), np.insert(factors, at, factor)
            self._slopes = np.insert(self._slopes, at, self._slopes[at])
        self._nodes, self._factors = nodes, factors
        steps = 0.5 * (factors[1:] + factors[:-1]) * np.diff(nodes)
        here = int(np.searchsorted(nodes, reference))
        below, above = -np.cumsum(steps[:here][::-1])[::-1], np.cumsum(steps[here:])
        self._thetas = np.concatenate([below, [0.0], above])

    def _from_node(self, place: float, nodes: FloatArray, factors: FloatArray, at: int) -> float:
        base = min(at, nodes.size - 1)
        return float(factors[base] + self._slopes[at] * (place - nodes[base]))

    def theta(self, potential: FloatArray) -> FloatArray:
        """The transformed potential, any shape."""
        piece, base = self._place(self._nodes, potential, self.reference)
        step = potential - self._nodes[base]
        return np.asarray(self._thetas[base] + step * (self._factors[base] + 0.5 * self._slopes[piece] * step))

    def potential(self, theta: FloatArray) -> FloatArray:
        """The potential of a transformed one, any shape."""
        piece, base = self._place(self._thetas, theta, 0.0)
        rise, factor = theta - self._thetas[base], self._factors[base]
        root = np.sqrt(np.maximum(factor**2 + 2.0 * self._slopes[piece] * rise, 0.0))
        return np.asarray(self._nodes[base] + 2.0 * rise / (factor + root))

    def factor(self, potential: FloatArray) -> FloatArray:
        """f, any shape."""
        piece, base = self._place(self._nodes, potential, self.reference)
        return np.asarray(self._factors[base] + self._slopes[piece] * (potential - self._nodes[base]))

    def factor_range(self, low: float, high: float) -> tuple[float, float]:
        """The least and the greatest factor between two potentials."""
        inside = self._factors[(self._nodes > low) & (self._nodes < high)]
        factors = np.concatenate([inside, self.factor(np.array([low, high]))])
        return float(factors.min()), float(factors.max())

    def degree(self, low: float, high: float) -> int | None:
        """Degree of theta between two potentials, None where the law has a kink between them."""
        inside = np.flatnonzero((self._nodes > low) & (self._nodes < high))
        kinks = np.abs(self._slopes[inside + 1] - self._slopes[inside])
        return 2 if (kinks <= SAME_SLOPE * self.bend).all() else None

    @cached_property
    def bend(self) -> float:
        """The greatest |f'|, which is how much theta bends over the potential."""
        return float(np.abs(self._slopes).max())

    def potential_bound(self, theta: FloatArray, bound: float | FloatArray) -> FloatArray:
        """How far the potential may be off where theta is off by the bound."""
        here = self.potential(theta)
        return np.maximum(self.potential(theta + bound) - here, here - self.potential(theta - bound))

    @staticmethod
    def _place(nodes: FloatArray, places: FloatArray, reference: float) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
        """The piece that a place is in, and the end of it that is nearer to the reference."""
        piece = np.searchsorted(nodes, places, side="right")
        base = np.where(places >= reference, piece - 1, piece)
        return piece, np.clip(base, 0, nodes.size - 1)


@dataclass(frozen=True)
class FilmLaw:
    """What a film face gives off, with and without radiation: its inflow is given_off(ambient) - given_off(potential).

    coefficient: of the film, 0 or more. radiation: or None. reference: level at which given_off is zero.
    """

    coefficient: float
    radiation: Radiation | None
    reference: float

    def given_off(self, potential: FloatArray) -> FloatArray:
        """Flow per area, any shape; it increases with the potential."""
        flow = self.coefficient * (potential - self.reference)
        if self.radiation is None:
            return np.asarray(flow)
        # Factors of the difference of fourth powers, which keep the digits of a small difference.
        here = np.maximum(potential + self.radiation.zero, 0.0)
        there = max(self.reference + self.radiation.zero, 0.0)
        return np.asarray(flow + self.radiation.coefficient * (here - there) * (here + there) * (here**2 + there**2))

    def slope(self, potential: FloatArray) -> FloatArray:
        """Derivative of what is given off, any shape; it does not decrease."""
        slope = np.full(np.shape(potential), self.coefficient)
        if self.radiation is not None:
            absolute = np.maximum(potential + self.radiation.zero, 0.0)
            slope = slope + 4.0 * self.radiation.coefficient * absolute**3
        return slope

    def bend(self, highest: float) -> float:
        """The greatest second derivative up to a potential."""
        if self.radiation is None:
            return 0.0
        return 12.0 * self.radiation.coefficient * max(highest + self.radiation.zero, 0.0) ** 2
