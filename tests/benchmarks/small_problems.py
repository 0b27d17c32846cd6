"""Many different small problems one after the other, as an optimiser or a table of variants asks for them."""

from __future__ import annotations

import time

import numpy as np

from service.core import Grid, solve
from tests.core.reference.cases import Case, Cells, Wall, walls

COUNT = 200


def film_plate(random: np.random.Generator) -> Case:
    """A plate with a pad of inflow, films on four faces and an insulated one; every number is new."""
    size = (random.uniform(20, 60), random.uniform(20, 60), random.uniform(1, 10))
    films = {
        face: Wall("R", random.uniform(15, 30), 10 ** random.uniform(-5, -2))
        for face in ("x_low", "x_high", "y_high", "z_high")
    }
    p, q = random.uniform(0.1, 0.5) * size[0], random.uniform(0.1, 0.5) * size[1]
    pad = Cells(0.0, ((p, p + 0.3 * size[0], q, q + 0.3 * size[1], 0.02),))
    k = tuple(random.uniform(0.05, 0.4, size=3))
    return Case(size, (k[0], k[1], k[2]), walls(**films, z_low=Wall("N", pad)))


def in_sequence() -> list[str]:
    """How many 41 x 41 planes of different problems are done in a second by one core."""
    random = np.random.default_rng(3)
    bodies = [film_plate(random).body() for _ in range(COUNT + 1)]

    def answer(index: int) -> None:
        solution = solve(bodies[index])
        x, y = (np.linspace(0.0, length, 41) for length in bodies[index].size[:2])
        plane = Grid(x, y, np.array([0.5 * bodies[index].size[2]]))
        solution.field(plane, tolerance=1e-9 * solution.span, with_flux=False)

    answer(COUNT)
    begin, processor = time.perf_counter(), time.process_time()
    for index in range(COUNT):
        answer(index)
    elapsed, processor = time.perf_counter() - begin, time.process_time() - processor
    return [
        f"{COUNT} different film problems, 41 x 41 plane, tolerance 1e-9 of the span: "
        f"{COUNT / elapsed:.0f} a second ({COUNT / processor:.0f} per second of processor time; wanted 150)"
    ]
