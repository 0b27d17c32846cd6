"""Evidence that an answer holds: its a-priori bound, and how far the two representations agree at places of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core import field, series
from service.core.endless import neighbourhood
from service.core.field import Setting

FloatArray = NDArray[np.float64]

# Places of an answer at which the series is summed as well.
CHECKED_PLACES = 4

METHOD = "time integral of three lines multiplied"
CHECKED = f"{METHOD}; eigenfunction series as the check"
UNCHECKED = f"{METHOD}; the eigenfunction series takes too many terms to check it here, or has none"


@dataclass(frozen=True)
class Certificate:
    """What stands behind an answer.

    error_bound: holds at every place asked for. agreement: largest difference between the time form and the
    eigenfunction series at the checked places, None if the series takes too many terms at all of them, or if there is
    none because two axes are endless.
    check_bound: what that difference may be, the sum of both forms' bounds. checked_places: how many.
    time_nodes, products, series_terms: what was summed: nodes in time, products of profiles, terms of the series.
    iterations, residual: of film faces, where the conductivity varies or they radiate: steps taken, and bound on what
    is left over of their condition, a flow per area; 0 steps and None where nothing was iterated.
    """

    error_bound: float
    agreement: float | None
    check_bound: float | None
    checked_places: int
    time_nodes: int
    products: int
    series_terms: int
    iterations: int = 0
    residual: float | None = None

    @property
    def method(self) -> str:
        """How the answer was had and checked, in words."""
        method = CHECKED if self.checked_places else UNCHECKED
        return f"{method}; film faces iterated" if self.iterations else method


@dataclass(frozen=True)
class SeriesCheck:
    """The whole field at one place by the series, with its bound and the terms it took."""

    value: float
    bound: float
    terms: int


def by_series(setting: Setting, point: FloatArray) -> SeriesCheck | None:
    """The field at a point by the series alone, or None where it would take too many terms."""
    values = [series.summed(setting.lines, part, [float(x) for x in point]) for part in setting.parts]
    kept = [value for value in values if value is not None]
    if len(kept) < len(values):
        return None
    return SeriesCheck(
        setting.reference + sum(value.value for value in kept),
        sum(value.bound for value in kept),
        sum(value.terms for value in kept),
    )


def certify(
    setting: Setting,
    points: FloatArray,
    error_bound: float,
    tolerance: float,
    off: Callable[[FloatArray, FloatArray], FloatArray] | None = None,
) -> Certificate:
    """Check an answer at a few of its places, shape (n, 3), and at places inside the body if none of those will do.

    off: how far the potential is off where the field has these values and is off by so much, shape (n,); None where the
    field is the potential.
    """
    chosen = points[np.unique(np.linspace(0, len(points) - 1, CHECKED_PLACES).round().astype(int))]
    checks = _checked(setting, chosen)
    if not checks:
        checks = _checked(setting, _inner_places(setting))
    products = sum(part.columns for part in setting.parts)
    if not checks:
        nodes = field.at_points(setting, chosen[:1], tolerance=tolerance, with_flux=False).node_count
        return Certificate(error_bound, None, None, 0, nodes, products, 0)
    places = np.array([place for place, _ in checks])
    answer = field.at_points(setting, places, tolerance=tolerance, with_flux=False)
    differences = np.abs([check.value for _, check in checks] - answer.potential)
    bounds = np.array([answer.potential_bound + check.bound for _, check in checks])
    if off is not None:
        differences, bounds = off(answer.potential, differences), off(answer.potential, bounds)
    return Certificate(
        error_bound,
        float(differences.max()),
        float(bounds.max()),
        len(checks),
        answer.node_count,
        products,
        sum(check.terms for _, check in checks),
    )


def _checked(setting: Setting, places: FloatArray) -> list[tuple[FloatArray, SeriesCheck]]:
    found = []
    for place in places:
        check = by_series(setting, place)
        if check is not None:
            found.append((place, check))
    return found


def _inner_places(setting: Setting) -> FloatArray:
    """Two places well inside the body, off its planes of symmetry."""
    low, high = np.array([neighbourhood(setting.lines, axis) for axis in range(3)]).T
    return low + np.array([[0.43, 0.57, 0.46], [0.61, 0.38, 0.53]]) * (high - low)
