"""The z line of a stack: layers with a contact conductance between them.

The stack separates like a body of one material if the conductivity along x takes the place of the heat capacity,

    c Z_t = (k Z')',   c = kx / kx of the first layer,   k = kz,

since ky / kx is the same in all layers. What goes through it is in `stack_laplace`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.core.lines.line import Drive, Line, Order, WallDrive
from service.core.lines.places import Places
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class StackLine(Line):
    """Layers from 0 up. Make one with `of`.

    thickness: of each layer, in the caller's unit; the heights of borders would not keep the digits of a thin one.
    borders: heights of the borders where the line is another one divided, whose own it keeps to the last digit.
    conductivity, capacity: k and c of each layer. contacts: conductance at each inner border, infinite if bonded.
    film_low, film_high are coefficients in the caller's units and scale is 1: slopes are k Z', the flow per area
    towards the low end, which is continuous, and an inflow drives with its own amount. Only distances that waves
    travel are scaled.
    """

    thickness: tuple[float, ...] = ()
    conductivity: tuple[float, ...] = ()
    capacity: tuple[float, ...] = ()
    contacts: tuple[float, ...] = ()
    borders: tuple[float, ...] = ()

    @classmethod
    def of(
        cls,
        thickness: Sequence[float],
        conductivity: Sequence[float],
        capacity: Sequence[float],
        contacts: Sequence[float],
        film_low: float,
        film_high: float,
    ) -> StackLine:
        """The line of layers given from below; one contact fewer than layers."""
        return cls(
            math.fsum(thickness),
            1.0,
            film_low,
            film_high,
            thickness=tuple(thickness),
            conductivity=tuple(conductivity),
            capacity=tuple(capacity),
            contacts=tuple(contacts),
        )

    @cached_property
    def heights(self) -> FloatArray:
        """Heights of the borders, from 0 to the top, shape (n_layers + 1,)."""
        if self.borders:
            return np.array(self.borders)
        return np.array([math.fsum(self.thickness[:count]) for count in range(len(self.thickness) + 1)])

    @cached_property
    def travel(self) -> FloatArray:
        """Scaled distance of each border from the low end: the sum of thickness * sqrt(c / k)."""
        slowness = np.sqrt(np.array(self.capacity) / np.array(self.conductivity))
        return np.concatenate([[0.0], np.cumsum(np.array(self.thickness) * slowness)])

    @cached_property
    def extent(self) -> float:
        """Scaled length."""
        return float(self.travel[-1])

    @property
    def steepest(self) -> float:
        """Largest conductance per area of a layer."""
        return max(k / thickness for k, thickness in zip(self.conductivity, self.thickness, strict=True))

    @cached_property
    def films_per_extent(self) -> tuple[float, ...]:
        """Films and contacts per scaled length, as a line of one material has them."""
        k, c = np.array(self.conductivity), np.array(self.capacity)
        effusivity = np.sqrt(k * c)
        contacts = [
            contact / float(min(pair)) for contact, pair in zip(self.contacts, pairwise(effusivity), strict=True)
        ]
        return (self.film_low / float(effusivity[0]), self.film_high / float(effusivity[-1]), *contacts)

    @cached_property
    def whole_capacity(self) -> float:
        """Integral of c over the height."""
        return float(np.array(self.thickness) @ np.array(self.capacity))

    @cached_property
    def slow_rates(self) -> tuple[float, float]:
        """Lower bounds on the decay rates of the first two modes; the first is 0 where nothing leaves the line.

        The sum of 1 / rate over all modes is the integral of c G(z, z) with Green's function G of the line at rest, a
        product of resistances (Mercer's theorem); no single 1 / rate exceeds it.
        """
        if self.keeps_its_mean:
            return 0.0, 1.0 / self._trace_about_the_mean()
        rate = 1.0 / self._trace()
        return rate, rate

    def _resistances(self) -> tuple[FloatArray, FloatArray]:
        """Resistance per area of each layer, and of the contact below it (0 below the first)."""
        contacts = np.concatenate([[0.0], 1 / np.array(self.contacts)]) if self.contacts else np.zeros(1)
        return np.array(self.thickness) / np.array(self.conductivity), contacts

    def _trace(self) -> float:
        layers, contacts = self._resistances()
        whole = float(layers.sum() + contacts.sum())
        nodes, weights = np.polynomial.legendre.leggauss(3)
        below = np.cumsum(layers + contacts) - layers
        at = below[:, None] + layers[:, None] * 0.5 * (1 + nodes)
        low = at + (1 / self.film_low if self.film_low > 0 else math.inf)
        high = whole - at + (1 / self.film_high if self.film_high > 0 else math.inf)
        green = 1 / (1 / low + 1 / high)
        content = np.array(self.thickness) * np.array(self.capacity)
        return float(content @ (green @ (0.5 * weights)))

    def _trace_about_the_mean(self) -> float:
        layers, contacts = self._resistances()
        content = np.array(self.thickness) * np.array(self.capacity)
        borders = np.concatenate([[0.0], np.cumsum(content)])
        nodes, weights = np.polynomial.legendre.leggauss(3)
        inside = borders[:-1, None] + content[:, None] * 0.5 * (1 + nodes)
        whole = borders[-1]
        total = float(layers @ ((inside * (whole - inside)) @ (0.5 * weights)))
        total += float(contacts @ (borders[:-1] * (whole - borders[:-1])))
        return total / float(whole)

    def from_end(self, coordinates: FloatArray, *, high: bool) -> FloatArray:
        """Scaled distance of places from one end, with digits of its own there."""
        if high:
            return self.mirrored().from_end(self.length - coordinates, high=False)
        return np.interp(coordinates, self.heights, self.travel)

    def between(self, coordinates: FloatArray, others: FloatArray) -> FloatArray:
        """Scaled distance between places."""
        return np.abs(self.from_end(coordinates, high=False) - self.from_end(others, high=False))

    def active_breaks(self, profiles: Profiles) -> tuple[FloatArray, NDArray[np.bool_], NDArray[np.bool_]]:
        """Borders, and which of them send out a jump and which a kink as time begins, shape (n,) each."""
        divided = self.divided(profiles.knots)
        values = divided.held_by_layers(profiles)
        has_jump = np.concatenate([[False], (values[1:] != values[:-1]).any(axis=1), [False]])
        has_kink = np.zeros_like(has_jump)
        for index, film in ((0, self.film_low), (-1, self.film_high)):
            has_jump[index] = film == math.inf and values[index].any()
            has_kink[index] = 0.0 < film < math.inf and values[index].any()
        return divided.heights, has_jump, has_kink

    def largest_jump(self, profiles: Profiles) -> FloatArray:
        """What a profile carries at the most, shape (n_profiles,)."""
        return np.abs(profiles.left).max(axis=0)

    def narrowest(self, profiles: Profiles) -> float:
        """Scaled width of the narrowest piece of profiles that is not zero, between jumps and the ends of the line."""
        divided = self.divided(profiles.knots)
        _, ends_piece, _ = self.active_breaks(profiles)
        ends_piece[[0, -1]] = True
        driven = (divided.held_by_layers(profiles)[ends_piece[:-1]] != 0).any(axis=1)
        return float(np.diff(divided.travel[ends_piece])[driven].min(initial=math.inf))

    def mean(self, drive: Drive) -> FloatArray:
        """What a line that loses nothing comes to, shape (n_columns,)."""
        if isinstance(drive, WallDrive):
            return np.ones(1) / self.whole_capacity
        divided = self.divided(drive.knots)
        content = np.array(divided.thickness) * np.array(divided.capacity)
        return content @ divided.held_by_layers(drive) / self.whole_capacity

    def held_by_layers(self, profiles: Profiles) -> FloatArray:
        """The profiles in the middle of each layer, shape (n_layers, n_profiles)."""
        return profiles.at(0.5 * (self.heights[1:] + self.heights[:-1]))

    def mirrored(self) -> StackLine:
        """The same line upside down."""
        return StackLine.of(
            self.thickness[::-1],
            self.conductivity[::-1],
            self.capacity[::-1],
            self.contacts[::-1],
            self.film_high,
            self.film_low,
        )

    def divided(self, knots: FloatArray) -> StackLine:
        """The same line with bonded borders at further heights."""
        inner = knots[(knots > 0) & (knots < self.length)]
        if not np.setdiff1d(inner, self.heights).size:
            return self
        thickness: list[float] = []
        layers: list[int] = []
        contacts: list[float] = []
        borders: list[float] = [0.0]
        for layer, whole in enumerate(self.thickness):
            bottom, top = self.heights[layer : layer + 2]
            cuts = np.unique(inner[(inner > bottom) & (inner < top)])
            parts = np.diff(np.concatenate([[bottom], cuts, [top]])) if cuts.size else np.array([whole])
            thickness += [float(part) for part in parts]
            layers += [layer] * parts.size
            contacts += [math.inf] * (parts.size - 1) + list(self.contacts[layer : layer + 1])
            borders += [*(float(cut) for cut in cuts), float(top)]
        line = StackLine.of(
            thickness,
            [self.conductivity[layer] for layer in layers],
            [self.capacity[layer] for layer in layers],
            contacts,
            self.film_low,
            self.film_high,
        )
        # Added up from the parts they would differ in the last digit, and a place on a contact change its side.
        return replace(line, length=self.length, borders=tuple(borders))

    def layer_of(self, coordinates: FloatArray) -> NDArray[np.intp]:
        """Which layer each place is in; a border belongs to the layer below it."""
        return np.clip(np.searchsorted(self.heights, coordinates, side="left") - 1, 0, len(self.capacity) - 1)


@dataclass(frozen=True, eq=False)
class Pieces:
    """Places cut at the borders. Piece `index` of the answer begins `below` over the bottom of layer `layer`.

    above: from its upper end to the top of the layer. width: of an interval, 0 for a place.
    """

    index: NDArray[np.intp]
    layer: NDArray[np.intp]
    below: FloatArray
    above: FloatArray
    width: FloatArray
    order: Order

    def upside_down(self, n_layers: int) -> Pieces:
        """The same pieces as the mirrored line has them."""
        return Pieces(self.index, n_layers - 1 - self.layer, self.above, self.below, self.width, self.order)

    def within(self, layer: int) -> NDArray[np.intp]:
        """Numbers of the pieces in a layer."""
        return np.flatnonzero(self.layer == layer)


def pieces_of(line: StackLine, places: Places) -> Pieces:
    """Places cut at the borders of a line's layers."""
    heights, thickness = line.heights, np.array(line.thickness)
    if places.high is None:
        layer = line.layer_of(places.low)
        below, above = places.low - heights[layer], heights[layer + 1] - places.low
        # The digits of a thin layer high up are those of its thickness.
        below = np.where(above == 0, thickness[layer], below)
        above = np.where(below == 0, thickness[layer], above)
        return Pieces(np.arange(layer.size), layer, below, above, np.zeros(layer.size), places.order)
    start = np.maximum(places.low[:, None], heights[:-1])
    stop = np.minimum(places.high[:, None], heights[1:])
    index, layer = np.nonzero(stop > start)
    start, stop = start[index, layer], stop[index, layer]
    below, above = start - heights[layer], heights[layer + 1] - stop
    width = np.where((below == 0) & (above == 0), thickness[layer], stop - start)
    return Pieces(index, layer, below, above, width, places.order)
