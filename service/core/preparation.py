"""What it costs to make a body ready whose conductivity varies or one of whose faces radiates, known before it starts.

Maps are read off in theta at the points of curved pieces and decomposed, and film faces are iterated on a grid that
follows every reading of their ambient. Both grow with the readings, before any place is asked for.
"""

from __future__ import annotations

import math

from service.core.conditions import Film, Held, map_of
from service.core.estimate import IN_PRODUCT, Estimate
from service.core.faces import axes_along
from service.core.film_faces import FIRST_PIECES
from service.core.kirchhoff import MOST_PIECES, RADIATED, READ_OFF, STRAIGHT_PIECES, exact_degree, kirchhoff_of
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.profiles import DEGREE

# Multiplications of a singular value decomposition of n by n numbers, in n^3, and of a law at one place, as measured.
DECOMPOSED, AT_A_PLACE = 0.5, 120.0

# Arrays of a map's table, and of the factors of a film face's grid, held at once.
TABLES_HELD, FACTORS_HELD = 8.0, 4.0

# Nodes in time of a coarse grid, about, and steps that an iteration takes to its first accuracy.
NODES, FIRST_STEPS = 300.0, 3


def estimate(body: Body) -> Estimate:
    """Multiplications and bytes of preparing a body, about; nothing for one of constant conductivity."""
    if not body.varies:
        return Estimate(0.0, 0.0)
    work = held = columns = 0.0
    films = []
    for face in body.present_faces:
        condition = body.faces[face]
        face_map = map_of(condition)
        if face_map is None or face_map.is_uniform:
            columns += 1
            continue
        if not isinstance(condition, Held | Film):
            columns += face_map.first.n_profiles
            continue
        lengths = tuple(body.size[axis] for axis in axes_along(face))
        degrees = [kirchhoff_of(body).degree(face_map.lowest, face_map.highest)]
        if isinstance(condition, Film):
            films.append(_film_points(face_map, lengths))
            degrees.append(1 if condition.radiation is None else RADIATED)
        for degree in degrees:
            cost, bytes_held, columns_there = _of_map(face_map, degree, lengths)
            work, held = work + cost, held + bytes_held
        columns += columns_there
    for points in films:
        first, second = (2.0 * count for count in points)
        grid = 2 * IN_PRODUCT * first * second * NODES * columns
        grid += AT_A_PLACE * first * second
        work += FIRST_STEPS * (grid + 2 * _decomposition(*points))
        held += 8.0 * (FACTORS_HELD * NODES * columns * (first + second) / 2 + TABLES_HELD * first * second)
    return Estimate(work, held)


def _of_map(face_map: FaceMap, degree: int | None, lengths: tuple[float, ...]) -> tuple[float, float, float]:
    """Work and bytes of reading off a function of a map that is a polynomial of a degree, and products it comes to."""
    rank = float(face_map.first.n_profiles)
    counts = [knots.size for knots in (face_map.first_knots, face_map.second_knots)]
    if degree == 1 or not face_map.bilinear:
        first, second = (float(count) for count in counts)
        return _decomposition(first, second), 8.0 * TABLES_HELD * first * second, rank
    exact = exact_degree(face_map, degree, lengths)
    places, telling, samples = [], [], []
    for count, length in zip(counts, lengths, strict=True):
        pieces = count - 1
        if math.isinf(length):
            places.append(float(STRAIGHT_PIECES * pieces))
            telling.append(places[-1])
            samples.append(READ_OFF * places[-1])
        elif exact is None:
            places.append(float(DEGREE * max(pieces, MOST_PIECES)))
            telling.append(places[-1])
            samples.append(READ_OFF * places[-1])
        else:
            places.append(float(DEGREE * pieces))
            telling.append(float(exact * pieces))
            samples.append(float(pieces))
    found = min(*telling, float(math.comb(int(rank) + (exact or DEGREE), exact or DEGREE)))
    looked_at = samples[0] * samples[1]
    work = _decomposition(*telling) + looked_at * (AT_A_PLACE + IN_PRODUCT * (rank + found))
    return work, 8.0 * TABLES_HELD * places[0] * places[1], found


def _decomposition(first: float, second: float) -> float:
    return DECOMPOSED * first * second * min(first, second)


def _film_points(face_map: FaceMap, lengths: tuple[float, ...]) -> tuple[float, float]:
    """Points along both axes of a film face at first."""
    pieces = [
        len(kinks) if curved else knots.size
        for knots, curved, kinks in zip(
            (face_map.first_knots, face_map.second_knots), face_map.curved, face_map.kinks, strict=True
        )
    ]
    first, second = (
        float((1 if math.isinf(length) else DEGREE) * (count + FIRST_PIECES))
        for count, length in zip(pieces, lengths, strict=True)
    )
    return first, second
