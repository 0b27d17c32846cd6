"""Which unknowns readings cannot tell apart, and what combination of them they do tell."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from service.analysis.evaluations import FloatArray

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

Form = Literal["product", "sum"]


@dataclass(frozen=True, eq=False)
class Combination:
    """Unknowns that go together, and what is known of them.

    members: their places. form: a product of powers or a sum of multiples. factors: the powers or the multiples, the
    first one 1. value, standard_uncertainty: of the combination. simple: the factors are simple numbers.
    """

    members: tuple[int, ...]
    form: Form
    factors: tuple[float, ...]
    value: float
    standard_uncertainty: float
    simple: bool


def told_together(values: FloatArray, root: FloatArray) -> list[Combination]:
    """Groups of unknowns that readings tell hardly apart, the closest first.

    values: shape (n,). root: F of the covariance F F^T, finite, of the values near the solution, shape (n, n); what is
    not known at all has an uncertainty like its range.
    """
    uncertainties = np.linalg.norm(root, axis=1)
    vectors, sizes, _ = np.linalg.svd(root / uncertainties[:, None])
    groups: list[Combination] = []
    for number in reversed(range(len(sizes))):
        vector = vectors[:, number]
        members = tuple(np.flatnonzero(np.abs(vector) > LEAST_PART * np.abs(vector).max()).tolist())
        if sizes[number] ** 2 >= LEAST_EIGENVALUE or len(members) < 2:
            continue
        part = list(members)
        factors = vector[part] / uncertainties[part]
        groups.append(_combination(members, factors, values[part], root[part]))
    return groups


def _combination(members: tuple[int, ...], factors: FloatArray, values: FloatArray, root: FloatArray) -> Combination:
    """The combination in the simplest form that is known as well. factors: those of a sum, near the values."""
    multiples = factors / factors[0]
    powers = multiples * values / values[0]
    forms: list[tuple[Form, FloatArray]] = [("product", powers), ("sum", multiples)]
    if not np.all(values > 0) or np.abs(powers).max() > MOST_POWER:
        forms = forms[1:]
    best = _spread(multiples, root) / float(np.linalg.norm(multiples))
    simple = [(form, rounded) for form, plain in forms if (rounded := _rounded(plain)) is not None]
    # Locally a product cannot be told from a sum; that with fewer factors beside 1 is more likely meant.
    for form, rounded in sorted(simple, key=lambda one: float(np.abs(np.log(np.abs(one[1]))).sum())):
        slopes = _slopes(form, rounded, values)
        spread = _spread(slopes, root)
        alone = float(np.linalg.norm(slopes * np.linalg.norm(root, axis=1)))
        if spread <= max(AS_GOOD * best * float(np.linalg.norm(slopes)), AS_ZERO * alone):
            return Combination(members, form, tuple(rounded.tolist()), _value(form, rounded, values), spread, True)
    form, plain = forms[0]
    slopes = _slopes(form, plain, values)
    spread = _spread(slopes, root)
    return Combination(members, form, tuple(plain.tolist()), _value(form, plain, values), spread, False)


def _spread(slopes: FloatArray, root: FloatArray) -> float:
    """Standard uncertainty of what has these derivatives."""
    return float(np.linalg.norm(slopes @ root))


def _value(form: Form, factors: FloatArray, values: FloatArray) -> float:
    if form == "product":
        return math.prod(value**factor for value, factor in zip(values.tolist(), factors.tolist(), strict=True))
    return float(factors @ values)


def _slopes(form: Form, factors: FloatArray, values: FloatArray) -> FloatArray:
    """Derivatives of the combination."""
    return factors * _value(form, factors, values) / values if form == "product" else factors


def _rounded(factors: FloatArray) -> FloatArray | None:
    """The factors with each replaced by the nearest simple number of its sign; None if one is far from all."""
    simple = np.array(SIMPLE)
    sizes = np.abs(factors)
    nearest = simple[np.argmin(np.abs(np.log(sizes[:, None] / simple)), axis=1)]
    if np.any(np.abs(sizes / nearest - 1) > NEARLY):
        return None
    return np.sign(factors) * nearest
