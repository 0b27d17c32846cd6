"""A smooth map over a face from readings: how rough it may be, what its entries are and how well they are known.

The entries u of a table of readings are given a normal distribution in which the bending energy

    E = integral of u_xx^2 + 2 u_xy^2 + u_yy^2

(second differences on axes that need not be even) has one scale, `departure`: the root mean square by which such a map
departs from a plane. This is Tikhonov's regularisation by second differences; a plane costs nothing.

How large the departure is, is seen from the readings by their marginal likelihood, which uses the uncertainties they
are given with. The discrepancy principle smooths too much where readings are few, and cross-validation, which ignores
the uncertainties, is unsteady there. The largest likelihood alone would settle on a plane as soon as readings do not
speak against one, and call it certain; so the departure is averaged over, with a half-normal prior as wide as the
typical size of an entry. Sources: Wahba, Journal of the Royal Statistical Society B 45 (1983) 133 (normal prior of
splines and its intervals); Rodgers, Inverse Methods for Atmospheric Sounding, 2000, chapters 3 and 10 (averaging
kernels, degrees of freedom for signal).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from service.analysis.evaluations import FloatArray
from service.analysis.fitting import Rows

BoolArray = NDArray[np.bool_]

# Departures that are averaged over, in parts of the typical size: below the least no reading tells a map from a plane,
# above the largest the prior has fallen to 3e-4.
LEAST_DEPARTURE, MOST_DEPARTURE, DEPARTURES = 1e-5, 4.0, 120

# Standard uncertainty of entries, in typical sizes, before anything is read: so wide that it weighs nothing, and finite
# so that what the readings leave open has a number.
WIDEST = 1e3

# A map is smoothed over lengths that near the readings are about their distance. Where the length is this many times
# what a quarter of the entries is better than, an entry is an extension of what was seen elsewhere.
FAR = 1.8

# Standard uncertainty of a number of which nothing but a range is known, in parts of it (rectangular distribution).
RECTANGULAR = 1 / math.sqrt(12)


@dataclass(frozen=True, eq=False)
class SmoothMap:
    """The entries of a table of readings, to be found.

    first, second: places of the entries along the two axes of the face, increasing, in one unit of length, two or more
    each. start: where to begin, shape (n_first, n_second). typical: a size that entries may have, > 0; it sets the
    scale of steps and the width of what departures are thought possible. departure: the departure from a plane, where
    it is to be taken as given. affine: the results are known to be affine functions of the entries.
    """

    name: str
    first: FloatArray
    second: FloatArray
    start: FloatArray
    typical: float
    departure: float | None = None
    affine: bool = False

    @property
    def departures(self) -> FloatArray:
        """Departures to be averaged over, in typical sizes."""
        if self.departure is not None:
            return np.array([self.departure / self.typical])
        return np.geomspace(LEAST_DEPARTURE, MOST_DEPARTURE, DEPARTURES)


def roughness(first: FloatArray, second: FloatArray) -> FloatArray:
    """Rows L, shape (n_rows, n_first n_second), such that |L u|^2 / departure^2 is the cost of the entries u.

    Scaled so that maps of that distribution depart from a plane by `departure` in the root mean square over entries.
    """
    widths = tuple(_widths(axis) for axis in (first, second))
    bent_first = np.kron(_second_differences(first), np.diag(np.sqrt(widths[1])))
    bent_second = np.kron(np.diag(np.sqrt(widths[0])), _second_differences(second))
    twisted = math.sqrt(2) * np.kron(_first_differences(first), _first_differences(second))
    rows = np.vstack((bent_first, bent_second, twisted))
    sizes = np.linalg.svd(rows, compute_uv=False)[: bends(first, second)]
    return rows * math.sqrt(float((sizes**-2).sum()) / rows.shape[1])


def bends(first: FloatArray, second: FloatArray) -> int:
    """How many independent maps cost anything: all but the planes."""
    return len(first) * len(second) - 3


def _widths(axis: FloatArray) -> FloatArray:
    """Length that each place stands for, by the trapezoidal rule."""
    gaps = np.diff(axis)
    return np.concatenate((gaps, [0.0])) / 2 + np.concatenate(([0.0], gaps)) / 2


def _first_differences(axis: FloatArray) -> FloatArray:
    """Rows whose squares add up to the integral of the squared slope."""
    return np.diff(np.eye(len(axis)), axis=0) / np.sqrt(np.diff(axis))[:, None]


def _second_differences(axis: FloatArray) -> FloatArray:
    """Rows whose squares add up to the integral of the squared second derivative."""
    slopes = np.diff(np.eye(len(axis)), axis=0) / np.diff(axis)[:, None]
    return np.diff(slopes, axis=0) / np.sqrt((axis[2:] - axis[:-2]) / 2)[:, None]


@dataclass(frozen=True, eq=False)
class Smoothed:
    """What readings say about ordinary unknowns and a map together, near a place.

    step: from the place, shape (size,), unknowns before entries, in coordinates. covariance: of the coordinates that
    are free. gain: how they follow the rows, shape (n_free, n_rows). departure: mean of those averaged over, in typical
    sizes. degrees: how many independent numbers the rows tell.
    """

    step: FloatArray
    covariance: FloatArray
    gain: FloatArray
    departure: float
    degrees: float


class Smoothing:
    """The prior of a map that is looked for. unknowns: how many coordinates stand before its entries."""

    def __init__(self, smooth: SmoothMap, unknowns: int) -> None:
        self._departures = smooth.departures
        self._bends = bends(smooth.first, smooth.second)
        rough = roughness(smooth.first, smooth.second)
        size = unknowns + rough.shape[1]
        # At least as many rows as columns, so that the singular vectors below are a whole basis.
        self._rough = np.zeros((max(len(rough), size), size))
        self._rough[: len(rough), unknowns:] = rough
        self._wide = np.eye(size) / WIDEST

    def rows(self, place: FloatArray, departure: float) -> Rows:
        """What the prior of one departure leaves over at a place, and its slopes."""
        slopes = np.vstack((self._rough / departure, self._wide))
        return slopes @ place, slopes

    def average(
        self, place: FloatArray, left: FloatArray, slopes: FloatArray, free: BoolArray | None = None
    ) -> Smoothed:
        """The step and the covariance, averaged over departures, where readings leave over `left` with these slopes.

        free: coordinates that may move, of those before the entries; all if None.

        With R^T R the information without roughness and the singular values b of L R^-1 (basis V) the posterior of one
        departure d has the covariance R^-1 V diag(1 / (1 + (b / d)^2)) V^T R^-T, and its likelihood follows from the
        same numbers.
        """
        free = np.ones(len(place), dtype=bool) if free is None else free
        slopes, rough, wide, centre = slopes[:, free], self._rough[:, free], self._wide[:, free], place[free]
        orthogonal, triangle = np.linalg.qr(np.vstack((slopes, wide)))
        _, sizes, basis = np.linalg.svd(solve_triangular(triangle, rough.T, trans="T").T, full_matrices=False)
        spread = solve_triangular(triangle, basis.T)
        departures = self._departures
        # The prior is about the map itself, so everything is counted from the place where all coordinates are zero.
        seen = slopes @ centre - left
        # What readings are in the basis: slopes @ spread, without the cancellation.
        seen_as = orthogonal[: len(slopes)] @ basis.T
        forces = seen_as.T @ seen
        shares = 1.0 / (1.0 + (sizes / departures[:, None]) ** 2)
        misfits = seen @ seen - (shares * forces**2).sum(axis=1)
        likelihoods = -0.5 * (misfits - np.log(shares).sum(axis=1)) - self._bends * np.log(departures)
        # The grid is even in the logarithm of the departure, the prior is half-normal in the departure itself.
        likelihoods += np.log(departures) - 0.5 * departures**2
        weights = np.exp(likelihoods - likelihoods.max())
        weights /= weights.sum()
        means = (shares * forces) @ spread.T
        mean = weights @ means
        scattered = (means - mean) * np.sqrt(weights)[:, None]
        share = weights @ shares
        within = (spread * share) @ spread.T
        step = np.zeros(len(place))
        step[free] = mean - centre
        return Smoothed(
            step,
            within + scattered.T @ scattered,
            (spread * share) @ seen_as.T,
            departure=float(weights @ departures),
            degrees=float(share @ (seen_as**2).sum(axis=0)),
        )


@dataclass(frozen=True, eq=False)
class Resolution:
    """What readings resolve of a map.

    lengths: over which the map is smoothed at each entry, in the unit of the axes, shape (n_first, n_second).
    degrees: how many independent numbers the readings tell about the map. open: entries that readings do not
    determine.
    """

    lengths: FloatArray
    degrees: float
    open: BoolArray


def resolution(smooth: SmoothMap, kernels: FloatArray, uncertainties: FloatArray) -> Resolution:
    """Resolution from averaging kernels and standard uncertainties.

    kernels: shape (n, n), row i says what part of each true entry is in the estimate of entry i. uncertainties: shape
    (n_first, n_second), in typical sizes.

    Per area a kernel is kernel / (area of an entry); the area over which it averages is one over its height at its own
    entry, and the length the square root of that. At a border the kernel is one-sided, which is made up for by whole
    areas there.
    """
    areas = np.outer(*(_whole_widths(axis) for axis in (smooth.first, smooth.second)))
    height = np.diag(kernels).reshape(areas.shape)
    face = math.sqrt(float(np.ptp(smooth.first) * np.ptp(smooth.second)))
    with np.errstate(divide="ignore"):
        lengths = np.sqrt(areas / np.maximum(height, 0.0))
    # What is smoothed over more than the face is not seen at all.
    is_open = (
        (lengths > FAR * np.sort(lengths, axis=None)[lengths.size // 4])
        | (lengths > face)
        | (uncertainties > RECTANGULAR)
    )
    return Resolution(lengths, float(np.trace(kernels)), is_open)


def _whole_widths(axis: FloatArray) -> FloatArray:
    """Length that each place stands for if the axis went on beyond its ends."""
    gaps = np.diff(axis)
    return (np.concatenate((gaps, gaps[-1:])) + np.concatenate((gaps[:1], gaps))) / 2
