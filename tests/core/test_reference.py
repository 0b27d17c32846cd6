"""The reference values themselves: two independent ways agree, and fields known in closed form come out.

The tolerance of 1e-20 of the span is what `tests/core/reference` promises; double precision knows sixteen
digits.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import pytest

from tests.core.reference.cases import Case, Cells, Readings, Wall, walls
from tests.core.reference.high_precision import HighPrecision
from tests.core.reference.intervals import OverRectangles
from tests.core.reference.kernels import Number, arithmetic
from tests.core.reference.series import by_series
from tests.core.reference.trilinear import KINDS, PLACES, trilinear_case, trilinear_field

TWENTY_DIGITS = 1e-20
INFINITE = math.inf

CENTRE_PAD = Cells(1.0, ((0.25, 0.5, 0.1, 0.4, -2.0), (0.6, 0.8, 0.1, 0.3, 3.0)))
TABLE = Readings((0.0, 0.4, 1.0), (0.0, 0.8), ((1.0, -2.0), (0.5, 3.0), (2.0, 0.25)))

# Name: case, place, and for each drive the axis left out of the series.
BOTH_WAYS = {
    "held pad on a bar": (
        Case(
            (1.0, 0.8, INFINITE),
            (1.0, 2.0, 0.5),
            walls(x_low="D", x_high="D", y_low=Wall("R", 0.0, 3.0), z_low=Wall("D", CENTRE_PAD)),
        ),
        (0.3, 0.2, 0.4),
        [2],
    ),
    "held pad on a bar with insulated sides": (
        Case((1.0, 0.8, INFINITE), (1.0, 2.0, 0.5), walls(z_low=Wall("D", CENTRE_PAD))),
        (0.3, 0.2, 0.4),
        [2],
    ),
    "film table on a bar with insulated sides": (
        Case((1.0, 0.8, INFINITE), (1.0, 2.0, 0.5), walls(z_low=Wall("R", TABLE, 1e-3))),
        (0.3, 0.2, 0.5),
        [2],
    ),
    "inflow table under a film": (
        Case(
            (1.0, 0.8, 0.7),
            (1.0, 2.0, 0.5),
            walls(
                x_low=Wall("R", 0.0, 1e9),
                x_high=Wall("R", 0.0, 1e-9),
                z_low=Wall("N", TABLE),
                z_high=Wall("R", 0.0, 2.0),
            ),
        ),
        (0.3, 0.2, 0.5),
        [2],
    ),
    "film far face and held side": (
        Case(
            (1.0, 0.8, 0.7),
            (1.0, 2.0, 0.5),
            walls(
                y_low="D",
                x_high=Wall("R", Cells(0.0, ((0.1, 0.3, 0.2, 0.4, 5.0),)), 0.7),
                z_high=Wall("R", CENTRE_PAD, 2.0),
            ),
        ),
        (0.3, 0.2, 0.2),
        [0, 2],
    ),
    "held side table of an insulated box": (
        Case((1.0, 0.8, 0.7), (1.0, 2.0, 0.5), walls(z_high=Wall("D", TABLE))),
        (0.9, 0.7, 0.3),
        [2],
    ),
    "balanced inflows, mean pinned": (
        Case(
            (1.0, 0.5, 0.75),
            (1.0, 2.0, 0.5),
            walls(
                z_low=Wall("N", Cells(0.0, ((0.25, 0.5, 0.25, 0.5, 2.0),))),
                x_high=Wall("N", Cells(0.0, ((0.0, 0.25, 0.5, 0.75, -2.0),))),
            ),
        ),
        (0.4, 0.2, 0.35),
        [0, 2],
    ),
    "box source seen from above": (
        Case(
            (1.0, 0.8, 0.7),
            (1.0, 2.0, 0.5),
            walls(x_low="D", y_high=Wall("R", 0.0, 4.0)),
            (((0.2, 0.1, 0.1), (0.6, 0.5, 0.2), 3.0),),
        ),
        (0.3, 0.2, 0.6),
        [2],
    ),
    "box source in a held bar": (
        Case(
            (1.0, 0.8, INFINITE),
            (1.0, 2.0, 0.5),
            walls(x_low="D", z_low=Wall("R", 0.0, 4.0)),
            (((0.2, 0.1, 0.1), (0.6, 0.5, 0.3), 3.0),),
        ),
        (0.3, 0.2, 0.9),
        [2],
    ),
    "box source in a box with insulated sides": (
        Case((1.0, 0.8, 0.7), (1.0, 2.0, 0.5), walls(z_high="D"), (((0.2, 0.1, 0.1), (0.6, 0.5, 0.2), 3.0),)),
        (0.3, 0.2, 0.6),
        [2],
    ),
}


@pytest.mark.parametrize("name", BOTH_WAYS)
def test_time_integral_and_double_series_agree(name: str) -> None:
    case, place, axes = BOTH_WAYS[name]
    reference = HighPrecision(case)
    potential, flux = reference.potential_and_flux(place)
    series = by_series(reference, place, axes)
    assert abs(potential - series[0]) < TWENTY_DIGITS
    for part, k, slope in zip(flux, case.conductivity, series[1:], strict=True):
        assert abs(part + k * slope) < 10 * TWENTY_DIGITS


# Every kind of mixture at one place each, the hardest (close to a corner) for the one with most kinds.
PAIRS = list(zip(KINDS, (*reversed(PLACES), PLACES[1]), strict=True))


@pytest.mark.parametrize(("kinds", "place"), PAIRS, ids=str)
def test_trilinear_field_is_reproduced_with_every_kind_of_face(kinds: str, place: tuple[float, float, float]) -> None:
    case = trilinear_case(kinds)
    potential, flux = HighPrecision(case).potential_and_flux(place)
    nearest = min(d for c, length in zip(place, case.size, strict=True) for d in (c, length - c) if d > 0)
    exact, exact_flux = trilinear_field(case, [arithmetic.mpf(c) for c in place])
    assert abs(potential - exact) < TWENTY_DIGITS
    for part, wanted in zip(flux, exact_flux, strict=True):
        # Single faces make fluxes of the order span / distance, which cancel in the sum.
        assert abs(part - wanted) < TWENTY_DIGITS * 10 / nearest


@pytest.mark.parametrize("place", [(0.5, 0.5, 1e-6), (1e-8, 0.5, 1e-6), (0.3, 0.5, 0.2), (0.3, 0.5, 10.0)], ids=str)
def test_closed_form_of_the_strip(place: tuple[float, float, float]) -> None:
    """u = (2 / pi) atan(sin(pi x) / sinh(pi z)) on a strip one wide (Carslaw and Jaeger 1959, chapter V)."""
    case = Case((1.0, 1.0, INFINITE), (1.0, 1.0, 1.0), walls(x_low="D", x_high="D", z_low=Wall("D", 1.0)))
    a = arithmetic
    x, z = a.mpf(place[0]), a.mpf(place[2])
    exact = 2 / a.pi * a.atan(a.sin(a.pi * x) / a.sinh(a.pi * z))
    assert abs(HighPrecision(case).potential(place) - exact) < TWENTY_DIGITS


PARTITION = Cells(1.0, ((0.25, 0.5, 0.25, 0.5, 1.0), (0.5, 0.75, 0.0, 0.5, 1.0)))


@pytest.mark.parametrize(
    ("size_z", "place"),
    [(1.0, (0.25, 0.25 + 1e-8, 0.0)), (INFINITE, (0.5, 1e-7, 1e-6)), (1.0, (0.4, 0.6, 0.7))],
    ids=["block, beside a jump line", "bar, beside two faces", "block, inside"],
)
def test_patches_that_cover_everything_with_one_make_one(size_z: float, place: tuple[float, float, float]) -> None:
    given = {
        "x_low": Wall("D", PARTITION),
        "x_high": Wall("R", PARTITION, 1e6),
        "y_low": Wall("R", PARTITION, 1e-6),
        "y_high": Wall("D", 1.0),
        "z_low": Wall("R", PARTITION, 2.0),
        "z_high": Wall("D", PARTITION),
    }
    case = Case((1.0, 1.0, size_z), (1.0, 4.0, 0.5), walls(**given))
    potential, flux = HighPrecision(case).potential_and_flux(place)
    assert abs(potential - 1) < TWENTY_DIGITS
    assert max(abs(part) for part in flux) < 1e-18


def test_side_of_a_bar_equals_that_of_a_long_block() -> None:
    """Sides held at zero let exp(-pi sqrt(2) 28) = 1e-54 through from the far end of a block of 30 widths."""
    side = {
        "x_low": Wall("D", 0.0),
        "x_high": Wall("D", 0.0),
        "y_low": Wall("D", 0.0),
        "z_low": Wall("N", 0.0),
    }
    found: list[Number] = []
    for size_z in (30.0, INFINITE):
        data = Cells(0.0, ((0.2, 0.7, 0.5, 1.5, 3.0),))
        case = Case((1.0, 1.0, size_z), (1.0, 1.0, 1.0), walls(**side, y_high=Wall("D", data)))
        found.append(HighPrecision(case).potential((0.4, 0.9, 0.8)))
    assert abs(found[0] - found[1]) < TWENTY_DIGITS


def _sources(*boxes: Sequence[float]) -> Case:
    return Case(
        (1.0, 1.0, 1.0),
        (1.0, 1.0, 1.0),
        walls(**dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_low", "z_high"), "D")),
        tuple(((b[0], b[1], b[2]), (b[3], b[4], b[5]), 1.0) for b in boxes),
    )


def test_source_in_the_whole_cube_equals_its_parts() -> None:
    whole = HighPrecision(_sources((0, 0, 0, 1, 1, 1))).potential((0.5, 0.5, 0.5))
    parts = HighPrecision(_sources((0, 0, 0, 1, 1, 0.375), (0, 0, 0.375, 0.25, 1, 1), (0.25, 0, 0.375, 1, 1, 1)))
    assert abs(parts.potential((0.5, 0.5, 0.5)) - whole) < TWENTY_DIGITS
    # Centre of a unit cube with unit source and cold faces, a classical constant.
    assert abs(whole - arithmetic.mpf("0.0562128298294354")) < 1e-15


def test_uniform_source_between_films_is_a_parabola() -> None:
    """One-dimensional: u = q z (c - z) / 2k + q c / 2h."""
    case = Case(
        (1.0, 1.0, 2.0),
        (1.0, 1.0, 0.5),
        walls(z_low=Wall("R", 0.0, 4.0), z_high=Wall("R", 0.0, 4.0)),
        (((0.0, 0.0, 0.0), (1.0, 1.0, 2.0), 3.0),),
    )
    potential, flux = HighPrecision(case).potential_and_flux((0.3, 0.0, 0.5))
    assert abs(potential - (3 * 0.5 * 1.5 / 1.0 + 3 * 2.0 / 8)) < TWENTY_DIGITS
    assert abs(flux[2] - 3 * (0.5 - 1.0)) < TWENTY_DIGITS


def test_integrals_over_rectangles_add_up_and_meet_known_values() -> None:
    """Spreading plate of the published table; halves of a section make the whole."""
    pad = (0.0375, 0.0625, 0.0375, 0.0625)
    plate = Case(
        (0.1, 0.1, 0.0013),
        (200.0, 200.0, 200.0),
        walls(z_low=Wall("N", Cells(0.0, ((*pad, 1600.0),))), z_high=Wall("R", 0.0, 100.0)),
    )
    over = OverRectangles(plate, 2)
    area = (arithmetic.mpf(pad[1]) - arithmetic.mpf(pad[0])) ** 2
    assert abs(over.integral(0.0, pad)[0] / area - arithmetic.mpf("1.52697555238767")) < 1e-14
    whole = over.integral(0.001, (0.0, 0.1, 0.0, 0.1))
    halves = [over.integral(0.001, (*ends, 0.0, 0.1)) for ends in ((0.0, 0.03), (0.03, 0.1))]
    for which in (0, 1):
        assert abs(halves[0][which] + halves[1][which] - whole[which]) < TWENTY_DIGITS
    # All that goes in, 1600 on the pad, goes through every section.
    assert abs(whole[1] - 1600 * area) < TWENTY_DIGITS
