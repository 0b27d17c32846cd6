"""Unknown numbers from readings: weighted least squares with everything that follows from it.

Readings y of results f(p), each with a standard uncertainty, some with a shared one on top, have a covariance V. The
unknowns p minimise (y - f)^T V^-1 (y - f), with what is known of them beforehand as further readings. At the minimum
their covariance is (J^T V^-1 J)^-1 with the derivatives J of the results (JCGM 100:2008, the GUM, and ISO/TS 28037 for
straight lines); 95 % intervals are normal because the uncertainties are given, or Student's where they are scaled by
what the readings leave over.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from scipy.stats import chi2, norm, t

from service.analysis import fitting, profiles, valleys
from service.analysis.calibrated import Calibration, Estimate, MapEstimate, Rival
from service.analysis.evaluations import Evaluate, FloatArray
from service.analysis.fitting import Found
from service.analysis.readings import Readings
from service.analysis.search import MOST_ROUNDS, SCREENED, Question, Solved, solve
from service.analysis.smoothing import RECTANGULAR, WIDEST, SmoothMap, resolution
from service.analysis.told_apart import Combination, free_members, held_best, told_together
from service.analysis.unknowns import Unknown

# Places a search begins at, unless told otherwise: the one given and others spread over the ranges.
STARTS = 5

# Probability an interval covers.
COVERED = 0.95

# What differences err by may not make up more than this part of the information along a direction, as a singular value.
LEAST_TOLD = 3.0

# Singular values below this part of the largest are rounding whatever differences err by.
ROUNDING = 1e-14

# A result follows a direction of which nothing is known if it does by more than this part of all it follows.
FOLLOWS = 1e-4

# A reading that the fit takes up by all but this leaves nothing over.
FOLLOWED = 1 - 1e-9

# Degrees of freedom below which there is nothing to test; with a map they are no integers.
LEAST_FREEDOM = 0.5

# A coordinate as near an end of its range as that is at it, but for rounding.
AT_END = 1e-12

# Other minima are the same if the readings differ by less than this many standard uncertainties between them.
SAME = 0.1

# A map enlarges the variance of an unknown it is confounded with by more than this: a correlation of 0.99.
CONFOUNDED = 50.0


class TooFewReadings(Exception):
    """Uncertainties cannot be scaled by what readings leave over: there are no more than they determine."""


def most_cases(unknowns: int, smooth: SmoothMap | None = None, *, starts: int = STARTS, profile: bool = False) -> int:
    """The most cases a calibration takes; one with a single minimum and little curvature takes a fifth of it."""
    entries = 0 if smooth is None else smooth.start.size
    look = 1 + 2 * unknowns + (entries if smooth is not None and smooth.affine else 2 * entries)
    searches = (starts if unknowns else 1) * fitting.MOST_LOOKS + (MOST_ROUNDS if entries else 0)
    if profile:
        searches += 2 * unknowns * profiles.MOST_LOOKS
    if smooth is None:
        searches += valleys.most_looks(unknowns)
    straight = 4 + 2 * unknowns + entries + look
    if smooth is not None and smooth.affine and not unknowns:
        return straight
    screened = SCREENED * (starts - 1) if smooth is None else 0
    return straight + screened + searches * look + 2 * unknowns


def calibrate(
    evaluate: Evaluate,
    unknowns: Sequence[Unknown],
    readings: Readings,
    *,
    smooth: SmoothMap | None = None,
    starts: int = STARTS,
    seed: int = 0,
    is_scaled: bool = False,
    profile: bool = False,
) -> Calibration:
    """The unknowns, and the entries of a map, that meet the readings best.

    evaluate: takes the unknowns in their order and then the entries of the map row by row. starts: places a search
    begins at, so that other minima are noticed; of no matter where all is linear. is_scaled: the uncertainties of the
    readings are known but for a common factor, which is found from what they leave over; not with a map. profile:
    intervals that follow the sum of squares are wanted too.
    Raises NothingSeen if no start has results, TooFewReadings if nothing is left over to scale by.
    """
    solved = solve(Question(evaluate, tuple(unknowns), readings, smooth, starts, seed, is_scaled))
    return _Statistics(solved, tuple(unknowns), smooth, is_scaled).answer(profile)


class _Spread:
    """Covariance of coordinates, and directions along which they are not known at all.

    covariance: shape (size, size). gain: how coordinates follow the rows, shape (size, n_rows). open: unit vectors,
    shape (n_open, size). regular: a root F of the covariance F F^T of the unknowns if each were known to a range, so
    that all of it is finite; a root, because what is known of a combination is lost in the variances of its members.
    """

    def __init__(self, solved: Solved, count: int) -> None:
        _, slopes = solved.weighing.rows(solved.found.look)
        size = slopes.shape[1]
        if solved.smoothed is not None:
            self.covariance, self.gain = solved.smoothed.covariance, solved.smoothed.gain
            self.open = np.zeros((0, size))
            variances, axes = np.linalg.eigh(self.covariance[:count, :count])
            self.regular = axes * np.sqrt(variances / (1 + variances))
        else:
            left_basis, sizes, basis = np.linalg.svd(slopes)
            least = max(LEAST_TOLD * solved.weighing.doubts(solved.found.look), ROUNDING * sizes.max(initial=0.0))
            # Fewer rows than unknowns leave directions open whatever they say.
            is_told = np.zeros(size, dtype=bool)
            is_told[: len(sizes)] = sizes > least
            sizes = sizes[is_told[: len(sizes)]]
            along = basis[is_told] / sizes[:, None]
            self.covariance = along.T @ along
            self.gain = along.T @ left_basis[:, : len(is_told)][:, is_told[: len(left_basis)]].T
            self.open = basis[~is_told]
            self.regular = np.hstack((basis[is_told].T / np.hypot(1, sizes), self.open.T))

    def of(self, slopes: FloatArray, doubts: FloatArray) -> FloatArray:
        """Standard uncertainty of what follows the coordinates, infinite along open directions.

        slopes: shape (n, size). doubts: by how much they may be off, of the same shape.
        """
        spread = np.sqrt(np.maximum(np.einsum("ni,ij,nj->n", slopes, self.covariance, slopes), 0.0))
        least = np.maximum(FOLLOWS * np.linalg.norm(slopes, axis=1), LEAST_TOLD * np.linalg.norm(doubts, axis=1))
        follows = np.abs(slopes @ self.open.T) > least[:, None]
        return np.where(follows.any(axis=1), np.inf, spread)


def _least(left: FloatArray, slopes: FloatArray) -> float:
    """The least sum of squares that steps along slopes bring what is left over to."""
    if not slopes.shape[1] or not np.isfinite(left).all():
        return float(left @ left)
    rest = left - slopes @ np.linalg.lstsq(slopes, left)[0]
    return float(rest @ rest)


class _Statistics:
    """What follows from a solution."""

    def __init__(
        self, solved: Solved, unknowns: tuple[Unknown, ...], smooth: SmoothMap | None, is_scaled: bool
    ) -> None:
        self._solved, self._unknowns, self._smooth = solved, unknowns, smooth
        self._look, self._weighing = solved.found.look, solved.weighing
        self._coordinates = solved.looker.coordinates
        self._count = len(unknowns)
        self._numbers = self._coordinates.numbers(self._look.place)
        self._rates = self._coordinates.rates(self._look.place)
        self._rows_left, self._rows_slopes = self._weighing.rows(self._look)
        self._spread = _Spread(solved, self._count)
        self._squares = float(self._rows_left @ self._rows_left)
        self._freedom = max(self._weighing.count - self._determined(), 0.0)
        self._scale, self._factor = 1.0, float(norm.ppf(0.5 + COVERED / 2))
        if is_scaled:
            if not self._freedom > 0:
                raise TooFewReadings
            self._scale = float(np.sqrt(self._squares / self._freedom))
            self._factor = float(t.ppf(0.5 + COVERED / 2, self._freedom))
        self._is_scaled = is_scaled
        self._confounded = self._confounded_with_map()
        alone = np.eye(self._coordinates.size)[: self._count]
        self._spreads = self._scale * self._spread.of(alone, np.zeros_like(alone))
        # What is told of these comes from the smoothness of the map and not from the readings.
        self._spreads[[k for k in self._confounded if unknowns[k].prior is None]] = np.inf

    def _confounded_with_map(self) -> list[int]:
        """Unknowns that readings do not tell from the map."""
        count = self._count
        if self._smooth is None or not count:
            return []
        # With the map as it is found the unknowns have the information of their own slopes.
        known = np.vstack((self._rows_slopes[:, :count], np.eye(count) / WIDEST))
        _, sizes, basis = np.linalg.svd(known, full_matrices=False)
        alone = ((basis / sizes[:, None]) ** 2).sum(axis=0)
        return np.flatnonzero(np.diag(self._spread.covariance)[:count] > CONFOUNDED * alone).tolist()

    def _determined(self) -> float:
        """How many independent numbers readings and prior values determine."""
        if self._solved.smoothed is None:
            return float(self._coordinates.size - len(self._spread.open))
        return self._solved.smoothed.degrees

    def answer(self, profile: bool) -> Calibration:
        """All of it. profile: intervals that follow the sum of squares are wanted."""
        look, readings, spread = self._look, self._weighing.readings, self._spread
        bent = self._bent()
        ends = self._profiles() if profile else [None] * self._count
        spreads = self._spreads
        fitted = look.slopes[readings.columns]
        taken_up = np.einsum("ni,ij,nj->n", fitted, spread.covariance, fitted)
        variances = readings.variances()
        left = readings.values - look.values[readings.columns]
        leverages = np.clip(taken_up / variances, 0.0, 1.0)
        free = self._scale * np.sqrt(np.where(leverages < FOLLOWED, variances - taken_up, np.nan))
        with np.errstate(invalid="ignore", divide="ignore"):
            # Scaled uncertainties are zero where nothing is left over.
            normalised = left / free
        limit = float(norm.isf((1 - COVERED) / 2 / len(left)))
        shares, shared = self._shares()
        minima, rivals = self._other_minima()
        probability = None
        if not self._is_scaled and self._freedom > LEAST_FREEDOM:
            probability = float(chi2.sf(self._squares, self._freedom))
        return Calibration(
            estimates=tuple(
                self._estimate(k, float(spreads[k]), float(bent[k]), ends[k], shares[k], shared[k])
                for k in range(self._count)
            ),
            smooth=None if self._smooth is None else self._map(self._smooth),
            correlation=self._correlation(),
            together=tuple(self._together()),
            values=look.values,
            bounds=look.bounds,
            standard_uncertainties=self._scale * spread.of(look.slopes, look.doubts),
            left=left,
            normalised=normalised,
            leverages=leverages,
            outliers=tuple(np.flatnonzero(np.abs(normalised) > limit).tolist()),
            chi_squared=self._squares,
            degrees_of_freedom=self._freedom,
            probability=probability,
            missed=self._is_missed(),
            scaled_by=self._scale,
            coverage_factor=self._factor,
            rivals=rivals,
            minima=minima,
            settled=self._solved.found.settled,
            linear=self._solved.linear,
            cases=self._solved.looker.cases,
        )

    def _estimate(
        self,
        k: int,
        spread: float,
        bent: float,
        ends: tuple[float, float] | None,
        shares: FloatArray,
        shared: FloatArray,
    ) -> Estimate:
        place = float(self._look.place[k])
        low, high = self._interval(k, place - self._factor * spread, place + self._factor * spread)
        return Estimate(
            name=self._unknowns[k].name,
            value=float(self._numbers[k]),
            standard_uncertainty=float(self._rates[k]) * spread,
            low=low,
            high=high,
            at="low" if place <= AT_END else "high" if place >= 1 - AT_END else None,
            told=spread <= RECTANGULAR,
            bent=bent,
            profile=ends,
            shares=shares,
            shared=shared,
        )

    def _interval(self, k: int, low: float, high: float) -> tuple[float, float]:
        """Numbers of an unknown at two coordinates of its own, within its range."""
        places = np.repeat(self._look.place[None], 2, axis=0)
        places[:, k] = np.where(np.isnan([low, high]), np.nan, np.clip([low, high], 0.0, 1.0))
        first, second = self._coordinates.numbers(places)[:, k].tolist()
        return first, second

    def _shares(self) -> tuple[FloatArray, FloatArray]:
        """Parts of the variance of each unknown that come from each reading and from each shared error."""
        readings, variances = self._weighing.readings, np.diag(self._spread.covariance)[: self._count, None]
        follow = self._weighing.follow(self._spread.gain[: self._count])
        along = [follow[:, shared.members].sum(axis=1) * shared.standard_uncertainty for shared in readings.shared]
        with np.errstate(invalid="ignore", divide="ignore"):
            shares = (follow * readings.standard_uncertainties) ** 2 / variances
            shared = np.array(along).reshape(len(along), self._count).T ** 2 / variances
        return shares, shared

    def _correlation(self) -> FloatArray:
        """Of the unknowns; NaN with one the readings do not tell."""
        covariance = self._spread.covariance[: self._count, : self._count]
        known = np.isfinite(self._spreads)
        sizes = np.sqrt(np.where(known, np.diag(covariance), np.nan))
        correlation = np.clip(covariance / np.outer(sizes, sizes), -1.0, 1.0)
        np.fill_diagonal(correlation, np.where(known, 1.0, np.nan))
        return correlation

    def _together(self) -> list[Combination]:
        """What readings tell of unknowns that are hardly told apart, and how far it holds."""
        # Nothing is hardly told where no uncertainty is left to scale, and nothing is told by readings that are missed.
        if self._count < 2 or not self._scale > 0 or self._is_missed():
            return []
        numbers = self._numbers[: self._count]
        root = self._scale * self._rates[: self._count, None] * self._spread.regular
        solved = self._solved
        groups = told_together(numbers, root, sums_only=solved.linear)
        if not groups or self._smooth is not None or self._count > valleys.MOST_UNKNOWNS:
            return [group[0] for group in groups]
        reaches = [(k, self._reach(k)) for k in free_members(groups, root)[: valleys.MOST_LINES]]
        places = valleys.follow(
            valleys.straight_looks(solved.found) if solved.linear else solved.looker.look,
            self._coordinates,
            solved.rows,
            solved.weighing.doubts(self._look),
            solved.found,
            reaches,
            self._scale**2,
            (self._scale * self._factor) ** 2,
        )
        walks = [self._coordinates.numbers(line)[:, : self._count] for line in places]
        return [held_best(group, walks) for group in groups]

    def _is_missed(self) -> bool:
        """Whether ranges keep readings from being met that nothing else would."""
        return self._freedom <= LEAST_FREEDOM and self._squares > self._factor**2

    def _reach(self, k: int) -> float:
        """How far an unknown may be from where it is: by its interval, or anywhere."""
        spread = float(self._spreads[k])
        return self._factor * spread if spread <= RECTANGULAR else 1.0

    def _bent(self) -> FloatArray:
        """How far the sum of squares is from a parabola at the ends of each interval; see Estimate.bent."""
        if self._solved.linear or not self._count:
            return np.full(self._count, np.nan)
        looker, rows, found = self._solved.looker, self._solved.rows, self._solved.found
        covariance = self._spread.covariance
        places = []
        for k in range(self._count):
            size = np.sqrt(covariance[k, k])
            step = self._scale * self._factor * covariance[k] / (size if size > 0 else 1.0)
            places += [found.look.place - step, found.look.place + step]
        places = [np.clip(place, self._coordinates.low, self._coordinates.high) for place in places]
        values, _ = looker.values(np.array(places))
        departures = np.full(len(places), np.inf)
        for number, (place, seen) in enumerate(zip(places, values, strict=True)):
            left, _ = rows(replace(found.look, place=place, values=seen))
            linear = found.left + found.slopes @ (place - found.look.place)
            # The others follow where the valley bends.
            others = np.delete(found.slopes, number // 2, axis=1)
            rise, parabola = (_least(side, others) - found.squares for side in (left, linear))
            if not parabola > 1e-3 * self._scale**2:
                departures[number] = 0.0
            elif np.isfinite(rise):
                departures[number] = abs(np.sqrt(max(rise, 0.0) / parabola) - 1.0)
        return departures.reshape(-1, 2).max(axis=1)

    def _profiles(self) -> list[tuple[float, float] | None]:
        """Intervals that follow the sum of squares, None for an unknown that readings do not tell."""
        solved, spreads = self._solved, self._spreads
        told = np.flatnonzero(spreads <= RECTANGULAR).tolist()
        intervals: list[tuple[float, float] | None] = [None] * self._count
        if solved.linear:
            for k in told:
                reach = self._factor * spreads[k]
                intervals[k] = self._interval(k, self._look.place[k] - reach, self._look.place[k] + reach)
            return intervals
        rise = (self._scale * self._factor) ** 2
        found = profiles.profile_intervals(solved.looker, solved.rows, solved.found, told, spreads[told], rise)
        for k, ends in zip(told, found, strict=True):
            intervals[k] = self._interval(k, ends.low, ends.high)
        return intervals

    def _other_minima(self) -> tuple[int, tuple[Rival, ...]]:
        """How many minima the starts led to, and those that readings do not rule out beside the best."""
        best, *others = self._solved.minima
        if len(self._spread.open):
            # A valley has no minimum of its own; that it is one is said otherwise.
            return 1, ()
        distinct = [best]
        for other in others:
            if other.settled and all(self._differ(other, known) for known in distinct):
                distinct.append(other)
        rise = (self._scale * self._factor) ** 2
        rivals = [other for other in distinct[1:] if other.squares - best.squares < rise]
        return len(distinct), tuple(self._rival(rival) for rival in rivals)

    def _rival(self, found: Found) -> Rival:
        left, _ = self._weighing.rows(found.look)
        return Rival(self._coordinates.numbers(found.look.place)[: self._count], float(left @ left))

    def _differ(self, one: Found, other: Found) -> bool:
        """Whether two places differ to the readings, as a line between them would have it."""
        step = one.look.place - other.look.place
        apart = [float(np.linalg.norm(found.slopes @ step)) for found in (one, other)]
        return max(apart) > SAME * self._scale

    def _map(self, smooth: SmoothMap) -> MapEstimate:
        solved, first, covariance = self._solved, self._count, self._spread.covariance
        assert solved.smoothed is not None
        shape = smooth.start.shape
        spreads = np.sqrt(np.diag(covariance)[first:]).reshape(shape)
        kernels = self._spread.gain[first:] @ self._rows_slopes[:, first:]
        values = self._look.place[first:].reshape(shape)
        return MapEstimate(
            name=smooth.name,
            values=smooth.typical * values,
            standard_uncertainties=smooth.typical * spreads,
            low=smooth.typical * (values - self._factor * spreads),
            high=smooth.typical * (values + self._factor * spreads),
            departure=smooth.typical * solved.smoothed.departure,
            resolution=resolution(smooth, kernels, spreads),
            confounded=tuple(self._confounded),
        )
