"""The resistance network that is equivalent to a body as seen from its pads.

With q the flows into the pads and u the mean rises above the environment, u = M q, and so q = G u with G the inverse
of M. That is what resistors do that join every two pads, of conductance -G_ij, and each pad with the environment, of
conductance sum over j of G_ij (nodal analysis). Means over pads obey no rule that makes each of them positive: a
negative one is part of an exact equivalent all the same.

Bounds: for every matrix A within B of M, and C the inverse as computed, A^-1 - C = sum over k >= 1 of (I - C A)^k C.
With D >= |I - C A| entry by entry the bound is (I - D)^-1 D |C|, which holds if the largest row sum of D is below one
(the verification of an approximate inverse; S. M. Rump, Verification methods, Acta Numerica 19 (2010)).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

EPS = float(np.finfo(float).eps)

# Rounding of the bound itself, which is a sum of positive terms.
INFLATED = 1 + 1e-9


@dataclass(frozen=True, eq=False)
class Network:
    """Conductances of the resistors that are equivalent to a body.

    between, between_bound: of every two pads, shape (n, n), symmetric, zero on the diagonal.
    to_environment, to_environment_bound: of each pad, shape (n,).
    """

    between: FloatArray
    between_bound: FloatArray
    to_environment: FloatArray
    to_environment_bound: FloatArray


def network(matrix: FloatArray, bound: FloatArray) -> Network | None:
    """The network of a matrix of mean rises per unit flow, shape (n, n), whose entries are not further off than bound.

    None where the matrix is not known well enough for its inverse to have a bound: pads too much alike.
    """
    rises, slack = 0.5 * (matrix + matrix.T), 0.5 * (bound + bound.T)
    if not (np.diag(rises) > 0).all():
        return None
    # Unit diagonal, so that large and small pads weigh alike in the test of convergence.
    scale = np.sqrt(np.diag(rises))
    conductances, error = _inverse(rises / np.outer(scale, scale), slack / np.outer(scale, scale))
    if conductances is None:
        return None
    conductances, error = conductances / np.outer(scale, scale), error / np.outer(scale, scale)
    between, between_bound = -conductances, error.copy()
    np.fill_diagonal(between, 0.0)
    np.fill_diagonal(between_bound, 0.0)
    rounding = len(scale) * EPS * np.abs(conductances).sum(axis=1)
    return Network(between, between_bound, conductances.sum(axis=1), error.sum(axis=1) + rounding)


def _inverse(matrix: FloatArray, slack: FloatArray) -> tuple[FloatArray | None, FloatArray]:
    """The inverse of a symmetric matrix of unit diagonal, and its bound, entry by entry; None if there is none."""
    size = len(matrix)
    unit = np.eye(size)
    try:
        inverse = np.linalg.inv(matrix)
    except np.linalg.LinAlgError:
        return None, slack
    sizes = np.abs(inverse)
    # The scaling and the product round as well.
    defect = np.abs(unit - inverse @ matrix) + sizes @ (slack + (size + 4) * EPS * np.abs(matrix))
    if not float(defect.sum(axis=1).max()) < 1.0:
        return None, slack
    error = INFLATED * np.linalg.solve(unit - defect, defect @ sizes) + 4 * EPS * sizes
    return 0.5 * (inverse + inverse.T), 0.5 * (error + error.T)


def resistance(conductance: float, bound: float) -> tuple[float, float] | None:
    """Resistance and its bound of a resistor whose conductance is known within a bound; None if it may be zero."""
    if not abs(conductance) > bound:
        return None
    value = 1.0 / conductance
    error = bound / (abs(conductance) * (abs(conductance) - bound)) + 2 * EPS * abs(value)
    return (value, error) if math.isfinite(error) else None
