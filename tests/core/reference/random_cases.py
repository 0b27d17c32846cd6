"""Random bodies over the whole range promised, and the places where they are hardest.

Sides from micrometres to kilometres with aspect ratios to 1e6, conductivities that differ by up to 1e6,
Biot numbers from 1e-9 to 1e9; patches, tables, box sources; blocks and bars. A seed makes the same body
everywhere.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from service.core import FACES, Face
from tests.core.reference.cases import Case, Cells, Data, Readings, Wall

Place = tuple[float, float, float]


def _power(random: np.random.Generator, low: float, high: float) -> float:
    """A number whose decimal logarithm is uniform."""
    return float(10.0 ** random.uniform(low, high))


def random_case(seed: int) -> Case:
    """A body with one or two driven faces, sometimes a box source; the other faces have zero data."""
    random = np.random.default_rng([2026, seed])
    scale = _power(random, -3, 0)
    spread = random.permutation([_power(random, -3, 0), 1.0, _power(random, 0, 3)])
    lengths = [scale * float(s) for s in spread]
    ratios = random.permutation([_power(random, -3, 0), 1.0, _power(random, 0, 3)])
    base = _power(random, -1, 2)
    conductivity = (base * float(ratios[0]), base * float(ratios[1]), base * float(ratios[2]))
    endless = random.random() < 0.3
    size = (lengths[0], lengths[1], math.inf if endless else lengths[2])
    faces = [face for face in FACES if not (endless and face == "z_high")]
    kinds = _kinds(random, faces, endless)
    driven = [str(face) for face in random.choice(faces, size=int(random.integers(1, 3)), replace=False)]
    bare = Case(size, conductivity, {})
    made: dict[Face, Wall] = {}
    for face in faces:
        axis = "xyz".index(face[0])
        length = lengths[axis]
        film = _power(random, -9, 9) * conductivity[axis] / length if kinds[face] == "R" else 0.0
        data: Data = 0.0
        if face in driven:
            # An inflow of k / L makes differences of potential of the order of one, whatever the sizes.
            strength = conductivity[axis] / length if kinds[face] == "N" else 1.0
            data = _map(random, bare.extent(face), strength, lengths[2])
        made[face] = Wall(kinds[face], data, film)
    return Case(size, conductivity, made, _sources(random, size, lengths, conductivity))


def _kinds(random: np.random.Generator, faces: Sequence[Face], endless: bool) -> dict[Face, str]:
    """Kinds of faces, not all of them with a given inflow, on a bar along its sides."""
    while True:
        kinds = {face: str(random.choice(["D", "N", "R"])) for face in faces}
        needed = faces[:4] if endless else faces
        if any(kinds[face] != "N" for face in needed):
            return kinds


def _cuts(random: np.random.Generator, length: float) -> tuple[float, float]:
    low, high = sorted(random.uniform(0.05, 0.95, size=2))
    return float(low) * length, float(high) * length


def _map(random: np.random.Generator, extent: tuple[float, float], strength: float, decay: float) -> Data:
    endless = math.isinf(extent[1])
    kind = random.choice(["uniform", "patch"] if endless else ["uniform", "patch", "table"])
    if kind == "uniform":
        return strength * float(random.uniform(0.5, 1.0))
    if kind == "patch":
        low, high = _cuts(random, extent[0])
        first, second = _cuts(random, decay if endless else extent[1])
        value = strength * float(random.uniform(-1.0, 1.0))
        return Cells(strength * float(random.uniform(-1.0, 1.0)), ((low, high, first, second, value),))
    axes = [(0.0, _cuts(random, length)[0], length) for length in extent]
    table = strength * random.uniform(-1.0, 1.0, size=(3, 3))
    return Readings(axes[0], axes[1], tuple(tuple(float(v) for v in row) for row in table))


def _sources(
    random: np.random.Generator,
    size: Sequence[float],
    lengths: Sequence[float],
    conductivity: Sequence[float],
) -> tuple[tuple[Place, Place, float], ...]:
    if random.random() > 0.3:
        return ()
    cuts = [_cuts(random, length) for length in lengths]
    density = max(k / length**2 for k, length in zip(conductivity, lengths, strict=True))
    low, high = (cuts[0][0], cuts[1][0], cuts[2][0]), (cuts[0][1], cuts[1][1], cuts[2][1])
    return ((low, high, density),)


def hard_places(case: Case, seed: int) -> dict[str, Place]:
    """Named places: inside, on a face, a millionth of a width off it, 1e-8 from a jump line."""
    random = np.random.default_rng([62, seed])
    reach = [length if math.isfinite(length) else min(case.size[:2]) for length in case.size]
    inside = [float(f) * length for f, length in zip(random.uniform(0.02, 0.98, size=3), reach, strict=True)]
    driven = [face for face in case.faces if case.walls[face].data != 0.0]
    face = driven[int(random.integers(len(driven)))]
    axis, high = "xyz".index(face[0]), face.endswith("high")

    def off_face(distance: float, start: Sequence[float]) -> Place:
        place = list(start)
        place[axis] = reach[axis] - distance if high else distance
        return place[0], place[1], place[2]

    width = min(reach[other] for other in range(3) if other != axis)
    places = {
        "inside": (inside[0], inside[1], inside[2]),
        "on a face": off_face(0.0, inside),
        "a millionth of a width from a driven face": off_face(min(1e-6 * width, 0.5 * reach[axis]), inside),
    }
    data = case.walls[face].data
    if isinstance(data, Cells):
        across = [other for other in range(3) if other != axis]
        start = list(inside)
        patch = data.patches[0]
        start[across[0]] = patch[0] + 1e-8 * reach[across[0]]
        start[across[1]] = 0.5 * (patch[2] + patch[3])
        places["close to a jump line"] = off_face(0.0, start)
    return places
