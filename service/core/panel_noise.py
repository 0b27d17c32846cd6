"""What the field beside a spot cannot know of its density between the means of panels.

A density that differs from its panels' means by a saw of the height of their steps and of their width w adds to the
field, at a distance d, a part that decays as exp(-2 pi d / w). At any one place it may vanish by chance, so that steps
from panel to panel tell of it and not changes from one refinement to another. In the outermost panel the density goes
as r^(-1/2) to the border. Panels that are thin the other way count with what they cover.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from service.core.faces import axes_along
from service.core.mixed_base import Base
from service.core.mixed_panels import Refined
from service.core.split import scale_of

FloatArray = NDArray[np.float64]

# The decay that is counted with, which leaves room for saws that are wider than one panel.
DECAY = 4.0

# Potential at a saw of height 1 and width 1; its first harmonic, of a height 1 / pi, makes 1 / (2 pi^2).
SAW = 0.08

# Next to a border the density has no bound, but the potential is off by 1 / pi of mean density times width on it, for a
# density that goes as r^(-1/2): a saw of four times the mean.
MOST_OF_BORDER = 4.0

# A place nearer to a border than this part of the panel there counts as so near.
NEXT_TO_BORDER = 1e-12

# Points that are looked at together.
POINTS_AT_ONCE = 10_000


def noise(base: Base, refined: Refined, points: FloatArray) -> tuple[FloatArray, FloatArray]:
    """For points, shape (n, 3), how far potential and flux density may be off by it, shape (n,) each."""
    pieces = [
        _noise(base, refined, points[start : start + POINTS_AT_ONCE]) for start in range(0, len(points), POINTS_AT_ONCE)
    ]
    return np.concatenate([piece[0] for piece in pieces]), np.concatenate([piece[1] for piece in pieces])


def _noise(base: Base, refined: Refined, points: FloatArray) -> tuple[FloatArray, FloatArray]:
    potential, flux = np.zeros(len(points)), np.zeros(len(points))
    scale = scale_of(base.body, base.axis)
    for spot, grid, flows in zip(base.spots, refined.grids, refined.flows, strict=True):
        density = (flows / grid.areas).reshape(grid.shape)
        height = np.abs(points[:, base.axis] - base.body.end_of(spot.face)) * scale
        for axis, other in (axes_along(spot.face), axes_along(spot.face)[::-1]):
            # Steps along one axis, of all panels side by side along the other: shape (n, panels).
            swapped = axis > other
            edges, sides = (grid.second, grid.first) if swapped else (grid.first, grid.second)
            values = density.T if swapped else density
            places = points[:, axis]
            index = np.clip(np.searchsorted(edges, places, side="right") - 1, 0, edges.size - 2)
            ends = (base.body.begins[axis], base.body.size[axis])
            towards = _towards_border(edges, ends, index, places)[:, None]
            own, steps = np.abs(values[index]), _steps(values)[index]
            beyond = _off(places, edges[:1], edges[-1:]) * scale_of(base.body, axis)
            beside = _off(points[:, other], sides[:-1], sides[1:]) * scale_of(base.body, other)
            distance = np.sqrt(height[:, None] ** 2 + beyond**2 + beside**2)
            width = (np.diff(edges)[index] * scale_of(base.body, axis))[:, None]
            thinner = np.minimum(width, np.diff(sides) * scale_of(base.body, other))
            decay = np.exp(-DECAY * distance / width) * thinner
            left = np.maximum(steps, own * towards) * decay
            flux += (left / (thinner + distance)).sum(axis=1)
            towards = np.minimum(towards, MOST_OF_BORDER)
            potential += SAW * scale * (np.maximum(steps, own * towards) * decay).sum(axis=1)
    return potential, flux


def _off(places: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Distance of places from intervals, shape (n, intervals)."""
    return np.maximum(np.maximum(low - places[:, None], places[:, None] - high), 0.0)


def _steps(values: FloatArray) -> FloatArray:
    """Largest step from each panel to its neighbours along the first axis."""
    steps = np.abs(np.diff(values, axis=0))
    nothing = np.zeros((1, values.shape[1]))
    return np.maximum(np.concatenate([nothing, steps]), np.concatenate([steps, nothing]))


def _towards_border(
    edges: FloatArray, sides: tuple[float, float], index: NDArray[np.intp], places: FloatArray
) -> FloatArray:
    """In the outermost panels and beyond, the width over the distance from the border, to the power 1/2; else 0.

    sides: of the body, where the border of a spot is none.
    """
    found = np.zeros(places.size)
    for panel, border, side in ((0, edges[0], sides[0]), (edges.size - 2, edges[-1], sides[1])):
        if border != side:
            width, away = edges[panel + 1] - edges[panel], np.abs(places - border)
            outermost = index == panel
            found[outermost] = np.sqrt(width / np.maximum(away, NEXT_TO_BORDER * width))[outermost]
    return found
