"""Which unknowns readings cannot tell apart, and what combination of them they do tell."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr

from service.analysis.evaluations import FloatArray

BoolArray = NDArray[np.bool_]

# Two unknowns correlated by 0.99 have a matrix of correlations with the least eigenvalue 0.01.
LEAST_EIGENVALUE = 0.01

# Unknowns that take part in a combination by less than this are not named with it.
LEAST_PART = 0.1

# Simple powers and factors a combination is rounded to, if it is as well known with them.
SIMPLE = (1 / 3, 1 / 2, 1.0, 2.0, 3.0)

# Standard uncertainty of a combination with simple factors that is as good: in parts of the one without, and of what it
# were if its members had nothing to do with each other. Covariances are not known well enough to tell less from zero.
AS_GOOD, AS_ZERO = 1.5, 1e-3

# A factor is replaced by a simple number no farther off than this part of it.
NEARLY = 0.2

# Powers above it are no product anyone means.
MOST_POWER = 10.0

# Products beyond exp of it, or below its inverse, are beyond numbers or nearly so.
MOST_LOGARITHM = 600.0

# A combination holds where its value is within so many standard uncertainties of that at the solution: an interval of
# 95 % and a quarter more, for what fits along the way stop short of.
HOLDS = 2.5

Form = Literal["product", "sum", "reciprocals"]


@dataclass(frozen=True, eq=False)
class Held:
    """How far a combination holds along the places that meet the readings about as well as the solution.

    throughout: at all of them. numbers: of its members at these places, shape (n_places, n_members). values: of the
    combination there, shape (n_places,), NaN where it has none. holds: where it holds, from the solution on, of the
    same shape.
    """

    numbers: FloatArray
    values: FloatArray
    holds: BoolArray

    @property
    def throughout(self) -> bool:
        """Whether it holds at all of them."""
        return bool(self.holds.all())


@dataclass(frozen=True, eq=False)
class Combination:
    """Unknowns that go together, and what is known of them.

    members: their places. form: a product of powers, a sum of multiples, or one of multiples of reciprocals, as of
    resistances in series. factors: the powers or the multiples, the first one 1. value, standard_uncertainty: of the
    combination. simple: the factors are simple numbers. held: how far it holds; None where that was not followed.
    """

    members: tuple[int, ...]
    form: Form
    factors: tuple[float, ...]
    value: float
    standard_uncertainty: float
    simple: bool
    held: Held | None = None


# What is known of one group, in the forms it may have: near the solution they are the same.
Group = list[Combination]


def told_together(values: FloatArray, root: FloatArray, *, sums_only: bool = False) -> list[Group]:
    """Groups of unknowns that readings tell hardly apart, each with its combinations, the likeliest first.

    values: shape (n,). root: F of the covariance F F^T, finite, of the values near the solution, shape (n, n); what is
    not known at all has an uncertainty like its range. sums_only: all results are affine functions of the values, so
    that nothing is told of products. Pairs go before combinations of more, which are only named for
    what pairs leave open; no pair is named that follows from two others.
    """
    uncertainties = np.linalg.norm(root, axis=1)
    alike = root / uncertainties[:, None]
    groups: list[Group] = []
    named: list[FloatArray] = []
    kin = list(range(len(values)))
    for vector, group in sorted(_pairs(values, root, alike), key=lambda pair: _unlikely(pair[1][0], pair[0], alike)):
        first, second = group[0].members
        if kin[first] != kin[second]:
            kin = [kin[first] if one == kin[second] else one for one in kin]
            groups.append(group)
            named.append(vector)
    for vector in _others(alike, named):
        members = tuple(np.flatnonzero(np.abs(vector) > LEAST_PART * np.abs(vector).max()).tolist())
        if len(members) > 1:
            part = list(members)
            groups.append(_forms(members, vector[part] / uncertainties[part], values[part], root[part]))
    return [[one for one in group if one.form == "sum"] for group in groups] if sums_only else groups


def _unlikely(combination: Combination, vector: FloatArray, alike: FloatArray) -> tuple[bool, float]:
    """What pairs are put in order by: simple ones first, and then the closest."""
    return not combination.simple, float(np.linalg.norm(vector @ alike))


def _pairs(values: FloatArray, root: FloatArray, alike: FloatArray) -> list[tuple[FloatArray, Group]]:
    """All pairs that are hardly told apart: directions in uncertainties, and their combinations."""
    uncertainties = np.linalg.norm(root, axis=1)
    found = []
    for members in combinations(range(len(values)), 2):
        part = list(members)
        vector = np.zeros(len(values))
        sign = -1.0 if alike[part[0]] @ alike[part[1]] > 0 else 1.0
        vector[part] = np.array([1.0, sign]) / math.sqrt(2)
        if float(np.linalg.norm(vector @ alike)) ** 2 < LEAST_EIGENVALUE:
            forms = _forms(members, vector[part] / uncertainties[part], values[part], root[part])
            found.append((vector, forms))
    return found


def _others(alike: FloatArray, named: Sequence[FloatArray]) -> list[FloatArray]:
    """Directions that are told beside those named, the closest first."""
    vectors, sizes, _ = np.linalg.svd(alike)
    told = vectors[:, sizes**2 < LEAST_EIGENVALUE]
    if named and told.size:
        basis = np.linalg.qr(np.array(named).T)[0]
        left, parts, _ = np.linalg.svd(told - basis @ (basis.T @ told), full_matrices=False)
        told = left[:, parts > math.sqrt(0.5)]
    spreads = np.linalg.norm(told.T @ alike, axis=1)
    return [told[:, k] for k in np.argsort(spreads) if spreads[k] ** 2 < LEAST_EIGENVALUE]


def free_members(groups: Sequence[Group], root: FloatArray) -> list[int]:
    """Unknowns that all others in the groups follow, one for each direction that is hardly told."""
    members = sorted({member for group in groups for member in group[0].members})
    if not members:
        return []
    alike = root[members] / np.linalg.norm(root[members], axis=1)[:, None]
    _, _, order = qr(alike.T, mode="economic", pivoting=True)
    return [members[k] for k in order[: max(len(members) - len(groups), 1)]]


def held_best(group: Group, walks: Sequence[FloatArray]) -> Combination:
    """The combination of a group that holds farthest; as it is where nothing was followed.

    walks: numbers of all unknowns along lines away from the solution, in order, shape (n_places, n) each.
    """
    if not walks:
        return group[0]
    followed = [replace(combination, held=_held(combination, walks)) for combination in group]
    return max(followed, key=lambda combination: int(combination.held.holds.sum()) if combination.held else 0)


def _held(combination: Combination, walks: Sequence[FloatArray]) -> Held:
    factors = np.array(combination.factors)
    numbers, values, holds = [], [], []
    for walk in walks:
        mine = walk[:, combination.members]
        seen = np.array([_value(combination.form, factors, one) for one in mine])
        near = np.abs(seen - combination.value) <= HOLDS * combination.standard_uncertainty
        numbers.append(mine)
        values.append(seen)
        holds.append(np.logical_and.accumulate(near))
    return Held(np.concatenate(numbers), np.concatenate(values), np.concatenate(holds))


def _forms(members: tuple[int, ...], factors: FloatArray, values: FloatArray, root: FloatArray) -> Group:
    """The combinations, those with simple factors that are known as well first. factors: of a sum, near the values."""
    multiples = factors / factors[0]
    powers = multiples * values / (values[0] or 1.0)
    forms: list[tuple[Form, FloatArray]] = [("sum", multiples)]
    if np.all(values > 0):
        forms.append(("reciprocals", powers * values / values[0]))
        if np.abs(powers).max() <= MOST_POWER and np.isfinite(_value("product", powers, values)):
            forms.insert(0, ("product", powers))
    best = _spread(multiples, root) / float(np.linalg.norm(multiples))
    simple = [(form, rounded) for form, plain in forms if (rounded := _rounded(plain)) is not None]
    found = []
    # Near the solution they are the same; that with fewer factors beside 1 is more likely meant.
    for form, rounded in sorted(simple, key=lambda one: float(np.abs(np.log(np.abs(one[1]))).sum())):
        slopes = _slopes(form, rounded, values)
        spread = _spread(slopes, root)
        alone = float(np.linalg.norm(slopes * np.linalg.norm(root, axis=1)))
        if spread <= max(AS_GOOD * best * float(np.linalg.norm(slopes)), AS_ZERO * alone):
            value = _value(form, rounded, values)
            found.append(Combination(members, form, tuple(rounded.tolist()), value, spread, True))
    for form, plain in forms:
        spread = _spread(_slopes(form, plain, values), root)
        found.append(
            Combination(members, form, tuple(plain.tolist()), _value(form, plain, values), spread, simple=False)
        )
    return found


def _spread(slopes: FloatArray, root: FloatArray) -> float:
    """Standard uncertainty of what has these derivatives."""
    return float(np.linalg.norm(slopes @ root))


def _value(form: Form, factors: FloatArray, values: FloatArray) -> float:
    """The combination; NaN where it has none, or none that is a number."""
    if form == "sum":
        return float(factors @ values)
    if not np.all(values > 0):
        return math.nan
    if form == "reciprocals":
        return float(factors @ (1 / values))
    logarithm = float(factors @ np.log(values))
    return math.exp(logarithm) if abs(logarithm) < MOST_LOGARITHM else math.nan


def _slopes(form: Form, factors: FloatArray, values: FloatArray) -> FloatArray:
    """Derivatives of the combination."""
    if form == "product":
        return factors * _value(form, factors, values) / values
    return factors if form == "sum" else -factors / values**2


def _rounded(factors: FloatArray) -> FloatArray | None:
    """The factors with each replaced by the nearest simple number of its sign; None if one is far from all."""
    simple = np.array(SIMPLE)
    sizes = np.abs(factors)
    nearest = simple[np.argmin(np.abs(np.log(sizes[:, None] / simple)), axis=1)]
    if np.any(np.abs(sizes / nearest - 1) > NEARLY):
        return None
    return np.sign(factors) * nearest
