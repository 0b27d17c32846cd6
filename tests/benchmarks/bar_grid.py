"""A million points on a semi-infinite bar, from a millionth of a width to ten widths from its end."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core import Field, Grid, solve
from tests.benchmarks import finite_differences
from tests.benchmarks.timing import shortest
from tests.core.reference.cases import Case, Wall, walls
from tests.core.reference.high_precision import HighPrecision

BAR = Case(
    (1.0, 1.0, math.inf),
    (1.0, 1.0, 1.0),
    walls(x_low="D", x_high="D", y_low="D", y_high="D", z_low=Wall("D", 1.0)),
)
ACROSS = np.linspace(0.0, 1.0, 101)
GRID = Grid(ACROSS, ACROSS, np.geomspace(1e-6, 10.0, 101))
TOLERANCE = 1e-9

# Places of the grid compared with more than twenty digits: some hundred at random, seeded.
CHECKED = 120


def field_on_grid(grid: Grid = GRID, tolerance: float = TOLERANCE) -> Field:
    """The core's answer from a body on, nothing kept but the caches of eigenvalues."""
    return solve(BAR.body()).field(grid, tolerance=tolerance, with_flux=False)


def worst_error(potential: NDArray[np.float64]) -> float:
    """Largest difference from the high-precision value at random places of the grid."""
    reference = HighPrecision(BAR)
    random = np.random.default_rng(1)
    worst = 0.0
    for i, j, k in random.integers(0, 101, size=(CHECKED, 3)):
        # The sides are compared as well, but not the corners of the section, which are cheap and exact.
        exact = reference.potential((ACROSS[i], ACROSS[j], GRID.z[k]))
        worst = max(worst, float(abs(exact - float(potential[i, j, k]))))
    return worst


def against_finite_differences() -> list[str]:
    """Time and worst error against some 400,000 unknowns of a seven-point scheme with algebraic multigrid."""
    found = field_on_grid()
    core_time = shortest(field_on_grid, 15)
    core_error = max(worst_error(found.potential), 1e-17)
    (differences, x, z), other_time = (
        finite_differences.solve_bar(),
        shortest(finite_differences.solve_bar, 2),
    )
    exact = solve(BAR.body()).field(Grid(x, x, z), tolerance=1e-12, with_flux=False).potential
    other_error = float(np.abs(differences - exact).max())
    return [
        f"101 x 101 x 101 grid, z from 1e-6 to 10 widths, tolerance {TOLERANCE:g}: {core_time * 1e3:.1f} ms",
        f"its bound {found.potential_bound:.1e}, worst error at {CHECKED} places {core_error:.1e}, "
        f"{found.node_count} nodes",
        f"7-point finite differences + algebraic multigrid, {differences.size:,} unknowns: "
        f"{other_time:.2f} s, worst error at its own nodes {other_error:.1e}",
        f"time ratio {other_time / core_time:.0f} (wanted 150 or more), "
        f"error ratio {other_error / core_error:.1e} (wanted 1e8 or more)",
    ]


def against_one_product() -> list[str]:
    """Time against the one matrix product that the same number of rank-one terms would cost."""
    found = field_on_grid()
    random = np.random.default_rng(2)
    left = random.random((101 * 101, found.node_count))
    right = random.random((found.node_count, 101))
    core_time, product_time = shortest(field_on_grid, 15), shortest(lambda: left @ right, 15)
    shapes = f"({left.shape[0]} x {left.shape[1]}) @ ({right.shape[0]} x {right.shape[1]})"
    return [
        f"one {shapes} product {product_time * 1e3:.1f} ms, the field {core_time * 1e3:.1f} ms: "
        f"ratio {core_time / product_time:.1f} (wanted at most 5)"
    ]
