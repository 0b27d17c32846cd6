"""A hundred pads on a stack of three layers: the whole influence matrix, and a pad that moves."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy import sparse
from scipy.sparse.linalg import cg

from service.core import Body, Influence, Layer, Pad, Rectangle, influence
from tests.benchmarks.timing import shortest
from tests.core.bodies import all_insulated, film

FloatArray = NDArray[np.float64]

# A plate 1 x 1 on a joint over a base that a film cools; conductivities in its own units.
LAYERS = (
    Layer(0.1, (1.0, 1.0, 1.0)),
    Layer(0.005, (0.02, 0.02, 0.02), 40.0),
    Layer(0.02, (2.0, 2.0, 2.0)),
)
FILM = 0.5
BODY = Body.stack((1.0, 1.0), LAYERS, all_insulated(z_low=film(FILM, 0.0)))

# Ten by ten pads, each in its own square of so many cells of the differences, ten to thirteen of them long.
PADS_ACROSS, CELLS_EACH, SHORTEST, LONGEST = 10, 20, 10, 13
ACROSS = PADS_ACROSS * CELLS_EACH
# Cells through each layer.
THROUGH = (8, 3, 6)

TOLERANCE = 1e-7


def pads() -> tuple[list[Pad], NDArray[np.intp]]:
    """Pads of any length and place along both axes, seeded, and their first and last cells, shape (n, 4)."""
    random = np.random.default_rng(8)
    cells = []
    for row in range(PADS_ACROSS):
        for column in range(PADS_ACROSS):
            length, width = random.integers(SHORTEST, LONGEST + 1, size=2)
            x = column * CELLS_EACH + random.integers(0, CELLS_EACH - length + 1)
            y = row * CELLS_EACH + random.integers(0, CELLS_EACH - width + 1)
            cells.append((x, x + length, y, y + width))
    spots = np.array(cells)
    return [Pad("z_high", Rectangle(*map(float, spot / ACROSS))) for spot in spots], spots


def moved(given: list[Pad]) -> list[Pad]:
    """The same with one pad a tenth of a cell further."""
    where = given[44].where
    step = 0.1 / ACROSS
    further = Rectangle(where.p_low + step, where.p_high + step, where.q_low, where.q_high)
    return [*given[:44], Pad("z_high", further), *given[45:]]


def by_differences(spots: NDArray[np.intp], index: int) -> FloatArray:
    """Mean rise of all pads for a unit flow into one: a column of the matrix by finite volumes and multigrid."""
    width = 1.0 / ACROSS
    heights = np.concatenate([np.full(n, layer.thickness / n) for n, layer in zip(THROUGH, LAYERS, strict=True)])
    layer_of = np.repeat(np.arange(len(LAYERS)), THROUGH)
    k = np.array([layer.conductivity[0] for layer in LAYERS])[layer_of]
    flat, one = sparse.eye_array(ACROSS), second_difference(ACROSS)
    # Across the faces of the cells: half cells in a row with the contact between them.
    resistances = [
        below / (2 * k_below) + above / (2 * k_above) + (1 / LAYERS[upper].contact_below if upper != lower else 0.0)
        for (below, above), (k_below, k_above), (lower, upper) in zip(
            pairwise(heights), pairwise(k), pairwise(layer_of), strict=True
        )
    ]
    up = 1 / np.array(resistances)
    main = np.concatenate([up, [0.0]]) + np.concatenate([[0.0], up])
    main[0] += 1 / (1 / FILM + heights[0] / (2 * k[0]))
    line = sparse.diags_array([-up, main, -up], offsets=(-1, 0, 1))
    matrix = (
        sparse.kron(sparse.kron(one, flat), sparse.diags_array(k * heights))
        + sparse.kron(sparse.kron(flat, one), sparse.diags_array(k * heights))
        + sparse.kron(sparse.kron(flat, flat), width**2 * line)
    ).tocsr()
    load = np.zeros((ACROSS, ACROSS, heights.size))
    x_low, x_high, y_low, y_high = spots[index]
    load[x_low:x_high, y_low:y_high, -1] = 1.0 / ((x_high - x_low) * (y_high - y_low))
    multigrid = pyamg.smoothed_aggregation_solver(matrix, max_coarse=500)
    solution, failed = cg(matrix, load.ravel(), rtol=1e-6, M=multigrid.aspreconditioner(), maxiter=200)
    assert failed == 0
    # From the middle of the top cells to the top, through which the flow goes where it is given.
    top = solution.reshape(load.shape)[:, :, -1] + load[:, :, -1] / width**2 * heights[-1] / (2 * k[-1])
    return np.array([top[a:b, c:d].mean() for a, b, c, d in spots])


def second_difference(count: int) -> sparse.dia_matrix:
    """Matrix of -u'' times the square of the spacing between two insulated ends."""
    main = np.full(count, 2.0)
    main[[0, -1]] = 1.0
    return sparse.diags_array([-np.ones(count - 1), main, -np.ones(count - 1)], offsets=(-1, 0, 1))


def against_one_load() -> list[str]:
    """Time of the whole matrix against finite differences for a single load."""
    given, spots = pads()
    found = whole(given)
    core_time = shortest(lambda: whole(given), 3)
    column, other_time = by_differences(spots, 44), shortest(lambda: by_differences(spots, 44), 1)
    error = float((np.abs(column - found.mean[:, 44]) / found.mean[:, 44]).max())
    unknowns = ACROSS**2 * sum(THROUGH)
    largest = float((found.bound / found.mean).max())
    return [
        f"{len(given)} pads on three layers, all {found.mean.size:,} entries: {core_time:.2f} s, "
        f"largest bound {largest:.1e} of its entry",
        f"{found.checked} entries by the general integral agree to {found.agreement:.1e} "
        f"(allowed {found.agreement_bound:.1e})",
        f"finite differences + algebraic multigrid for one load, {unknowns:,} unknowns, {SHORTEST} to {LONGEST} cells "
        f"a pad: {other_time:.2f} s, off by {error:.1e} of an entry at the most",
        f"ratio {other_time / core_time:.1f} (wanted more than 1)",
    ]


def whole(given: list[Pad]) -> Influence:
    """The core's matrix."""
    return influence(BODY, given, tolerance=TOLERANCE)


def with_one_moved() -> list[str]:
    """Time of the matrix after one pad has moved against that of all pads."""
    given, _ = pads()
    before, others = whole(given), moved(given)
    again = influence(BODY, others, tolerance=TOLERANCE, earlier=before)
    afresh = whole(others)
    off = float(np.abs(again.mean - afresh.mean).max())
    all_time = shortest(lambda: whole(others), 3)
    one_time = shortest(lambda: influence(BODY, others, tolerance=TOLERANCE, earlier=before), 3)
    return [
        f"one pad of {len(given)} moved: {one_time * 1e3:.0f} ms, all of them afresh {all_time * 1e3:.0f} ms, "
        f"entries the same to {off:.1e}",
        f"ratio {all_time / one_time:.1f} (wanted more than 1)",
    ]
