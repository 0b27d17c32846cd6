"""The ordinary way to the same field: seven-point finite differences and algebraic multigrid."""

from __future__ import annotations

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy import sparse
from scipy.sparse.linalg import cg

FloatArray = NDArray[np.float64]

# Cells over the width and over the length of the bar that is kept: 49 x 49 x 164 unknowns, 393,764.
CELLS, LENGTH_CELLS = 50, 165


def second_difference(count: int) -> sparse.dia_matrix:
    """Matrix of -u'' times the square of the spacing between two held ends."""
    return sparse.diags_array([-np.ones(count - 1), 2 * np.ones(count), -np.ones(count - 1)], offsets=(-1, 0, 1))


def solve_bar() -> tuple[FloatArray, FloatArray, FloatArray]:
    """Unit square bar, sides at 0, end at 1, cut off at 3.3 widths: the field at inner nodes, and their x
    and z.

    The cut costs exp(-3.3 pi sqrt 2) = 4e-7. Shape of the field (49, 49, 164).
    """
    across, along = CELLS - 1, LENGTH_CELLS - 1
    one, line = sparse.eye_array(across), second_difference(across)
    one_z, line_z = sparse.eye_array(along), second_difference(along)
    matrix = (
        sparse.kron(sparse.kron(line, one), one_z)
        + sparse.kron(sparse.kron(one, line), one_z)
        + sparse.kron(sparse.kron(one, one), line_z)
    ).tocsr()
    load = np.zeros((across, across, along))
    load[:, :, 0] = 1.0
    multigrid = pyamg.ruge_stuben_solver(matrix, max_coarse=500)
    solution, failed = cg(matrix, load.ravel(), rtol=1e-8, M=multigrid.aspreconditioner(), maxiter=100)
    assert failed == 0
    spacing = 1.0 / CELLS
    x, z = np.arange(1.0, CELLS) * spacing, np.arange(1.0, LENGTH_CELLS) * spacing
    return np.asarray(solution).reshape(load.shape), x, z
