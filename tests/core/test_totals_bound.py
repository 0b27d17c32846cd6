"""Bounds of means and of flows through faces, parts of faces and planes, against values of more than twenty
digits.

Random bodies of the whole range, driven on the faces square to one axis; a random rectangle of that axis'
faces and of a plane between them.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from service.core import FACES, Rectangle, Solution, solve
from tests.core.reference.cases import Case
from tests.core.reference.intervals import OverRectangles
from tests.core.reference.kernels import Number
from tests.core.reference.random_cases import random_case

ACCURACY = 1e-9
WIDEST = 1000

# What the reference may be off, of the same scale as the accuracy.
REFERENCE_ERROR = 1e-20
SEEDS = range(8)


def driven_along_one_axis(seed: int) -> tuple[Case, int]:
    """A random body whose data are kept on the faces square to one axis only."""
    case = random_case(seed)
    axis = next("xyz".index(face[0]) for face in case.faces if case.walls[face].data != 0.0)
    kept = {f: w if f[0] == "xyz"[axis] else replace(w, data=0.0) for f, w in case.walls.items()}
    return replace(case, walls=kept), axis


def random_rectangle(case: Case, axis: int, random: np.random.Generator) -> tuple[float, float, float, float]:
    """A rectangle square to an axis, sometimes up to the edges."""
    ends: list[float] = []
    for other in range(3):
        if other != axis:
            length = min(case.size[other], 3 * max(case.size[:2]))
            low, high = sorted(random.uniform(0.0, 1.0, size=2))
            if math.isfinite(case.size[other]) and random.random() < 0.4:
                low, high = 0.0, 1.0
            ends += [float(low) * length, float(high) * length]
    return ends[0], ends[1], ends[2], ends[3]


def check(found: float, bound: float, exact: Number, scale: float, what: str) -> None:
    """Not further off than the bound; the bound not wide, or below the accuracy on the scale."""
    error = float(abs(exact - found))
    assert error <= bound + REFERENCE_ERROR * scale, what
    assert bound <= max(WIDEST * error, ACCURACY * scale), what


def flow_scale(solution: Solution, case: Case, axis: int, area: float) -> float:
    """Span times conductivity times area over the shortest way along the axis or across the body."""
    k = case.conductivity[axis]
    # A length across counts as long as it is for the axis' own conductivity.
    lengths = [length * math.sqrt(k / c) for length, c in zip(case.size, case.conductivity, strict=True)]
    return solution.span * k * area / min(lengths)


@pytest.mark.parametrize("seed", SEEDS)
def test_means_and_flows_are_within_their_bounds(seed: int) -> None:
    case, axis = driven_along_one_axis(seed)
    random = np.random.default_rng([7, seed])
    ends = random_rectangle(case, axis, random)
    rectangle, area = Rectangle(*ends), (ends[1] - ends[0]) * (ends[3] - ends[2])
    solution = solve(case.body())
    tolerance = ACCURACY * solution.span
    reference = OverRectangles(case, axis)
    scale = flow_scale(solution, case, axis, area)
    for face in (FACES[2 * axis], FACES[2 * axis + 1]):
        if face not in case.faces:
            continue
        position, inward = (case.size[axis], -1) if face.endswith("high") else (0.0, 1)
        total = solution.face_total(face, rectangle, tolerance=tolerance)
        if total.value is None:
            # Held values meet in a jump here: nothing to compare with.
            assert total.causes
            continue
        integral, flow = reference.integral(position, ends)
        mean = solution.mean(face, rectangle, tolerance=tolerance)
        check(mean.value, mean.error_bound, integral / area, solution.span, f"mean over {face}")
        assert total.error_bound is not None
        check(total.value, total.error_bound, inward * flow, scale, f"flow through {face}")
    length = case.size[axis] if math.isfinite(case.size[axis]) else case.size[0]
    position = float(random.uniform(0.05, 0.95)) * length
    through = solution.plane_total(axis, position, rectangle, tolerance=tolerance)
    assert through.value is not None
    assert through.error_bound is not None
    check(
        through.value,
        through.error_bound,
        reference.integral(position, ends)[1],
        scale,
        "flow through a plane",
    )
