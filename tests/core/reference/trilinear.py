"""A field that solves the equation exactly whatever the conductivities, with faces of every kind made from
it.

    u = 3 + x - 2 y + ... + 2 x y z      (each u_xx = u_yy = u_zz = 0)

Its traces on the faces are bilinear, so held values, inflows and ambients are exact tables of readings. All
numbers are binary fractions, exact in double precision.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from service.core import FACES, Face
from tests.core.reference.cases import Case, Readings, Wall

SIZE = (1.0, 0.5, 2.0)
CONDUCTIVITY = (1.0, 2.0, 0.25)
FILMS = dict(zip(FACES, (2.0, 0.5, 2.0**-30, 4.0, 2.0**30, 1.0), strict=True))

# Kinds of the faces in the order of FACES.
KINDS = ("DNRDNR", "NDDRRN", "RRRRRR", "DDDDDD", "NNNNND")
# In the body, a millionth from a face, on a face, and close to a corner.
PLACES = ((0.3, 0.2, 0.7), (2.0**-20, 0.25, 1.0), (0.0, 0.2, 0.7), (1 - 2.0**-26, 2.0**-27, 2 - 2.0**-25))


def trilinear_field(case: Case, place: Sequence[Any]) -> tuple[Any, list[Any]]:
    """u and the flux density at a place, in the arithmetic of the place."""
    x, y, z = place
    u = 3 + x - 2 * y + z / 2 + 0.75 * x * y - 1.5 * y * z + 0.25 * x * z + 2 * x * y * z
    slopes = [
        1 + 0.75 * y + 0.25 * z + 2 * y * z,
        -2 + 0.75 * x - 1.5 * z + 2 * x * z,
        0.5 - 1.5 * y + 0.25 * x + 2 * x * y,
    ]
    return u, [-k * slope for k, slope in zip(case.conductivity, slopes, strict=True)]


def trilinear_case(kinds: str, size: tuple[float, float, float] = SIZE) -> Case:
    """The body with faces of the given kinds, in the order of FACES, all made from the field."""
    bare = Case(size, CONDUCTIVITY, {})
    given: dict[Face, Wall] = {}
    for face, kind in zip(FACES, kinds, strict=True):
        axis, high = "xyz".index(face[0]), face.endswith("high")
        first, second = bare.extent(face)
        rows = []
        for p in (0.0, first / 2, first):
            row = []
            for q in (0.0, second):
                place = [p, q]
                place.insert(axis, size[axis] if high else 0.0)
                u, flux = trilinear_field(bare, place)
                inflow = -flux[axis] if high else flux[axis]
                row.append({"D": u, "N": inflow, "R": u + inflow / FILMS[face]}[kind])
            rows.append(tuple(row))
        data = Readings((0.0, first / 2, first), (0.0, second), tuple(rows))
        given[face] = Wall(kind, data, FILMS[face] if kind == "R" else 0.0)
    return Case(size, CONDUCTIVITY, given)
