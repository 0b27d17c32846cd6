"""Bodies with any number of endless axes: pads on half-spaces and corners, wide plates, sheets and endless bars.

Expected values are closed forms and published figures; each test names its own.
"""

from __future__ import annotations

import math
import os
from collections.abc import Sequence

import numpy as np
import pytest
from mpmath import mp, mpf
from numpy.typing import NDArray
from scipy.special import k0

from service.core import (
    AXES,
    Body,
    BoxSource,
    Condition,
    Face,
    FaceMap,
    Film,
    Held,
    Inflow,
    Layer,
    NoSteadyState,
    NotPhysical,
    OutsideBody,
    Pad,
    Patch,
    Rectangle,
    Solution,
    Total,
    influence,
    solve,
)
from service.core.faces import axes_along
from tests.core.bodies import INSULATED, UNIT, all_insulated, film, held
from tests.core.reference.open_pads import OpenPad, Place, places_of, random_pad
from tests.core.reference.published import Quantity, published_quantities

ENDLESS = math.inf
OPEN = (-math.inf, -math.inf)
OPEN_AXIS = (-math.inf, math.inf)
HALF_SPACE = (True, True, False)
ALL_SPACE = (True, True, True)

# Of the span, and what may lie between two answers that are equal but for rounding.
ACCURACY, ROUNDING = 1e-10, 1e-14

# OPEN_SEEDS=400 runs as many random pads.
SEEDS = range(int(os.environ.get("OPEN_SEEDS", "16")))
WIDEST = 1000

SQUARE = Rectangle(-0.5, 0.5, -0.5, 0.5)


def on_open_face(*pads: tuple[Rectangle, float], background: float = 0.0) -> FaceMap:
    """Pads on a face without ends along both of its axes."""
    patches = [Patch(where, value) for where, value in pads]
    return FaceMap.patches((ENDLESS, ENDLESS), background, patches, begins=OPEN)


def half_space(condition: Condition, conductivity: tuple[float, float, float] = UNIT) -> Body:
    """All below the plane z = 0."""
    return Body((ENDLESS,) * 3, conductivity, {"z_low": condition}, infinite=HALF_SPACE)


def plate(z_low: Condition, z_high: Condition, thickness: float = 1.0) -> Body:
    """A plate without ends along x and y."""
    return Body((ENDLESS, ENDLESS, thickness), UNIT, {"z_low": z_low, "z_high": z_high}, infinite=HALF_SPACE)


def values(solution: Solution, places: Sequence[Place], accuracy: float = ACCURACY) -> NDArray[np.float64]:
    """Potential at places."""
    return solution.field_at(np.array(places), tolerance=accuracy * solution.span).potential


def finite(total: Total) -> float:
    """The value of a total that has one, which its bound has to hold up to."""
    assert total.value is not None
    return total.value


SQUARE_PAD = half_space(Inflow(on_open_face((SQUARE, 1.0))))
PUBLISHED_PADS = [
    quantity for quantity in published_quantities() if quantity.how in ("half_space_mean", "half_space_point")
]


@pytest.mark.parametrize("quantity", PUBLISHED_PADS, ids=str)
def test_published_pad_on_a_half_space_itself(quantity: Quantity) -> None:
    root = math.sqrt(quantity.details.get("ratio", 1))
    where = Rectangle(-0.5 * root, 0.5 * root, -0.5 / root, 0.5 / root)
    solution = solve(half_space(Inflow(on_open_face((where, 1.0)))))
    if quantity.how == "half_space_mean":
        found = solution.mean("z_low", where, tolerance=1e-12).value
    else:
        found = values(solution, [(0.5, 0.5, 0.0) if quantity.details["place"] == "corner" else (0.0, 0.0, 0.0)])[0]
    assert found == pytest.approx(quantity.value, rel=0, abs=1e-12)


def test_centre_and_corner_of_a_square_pad_in_closed_form() -> None:
    # 2 ln(1 + sqrt 2) / pi times q L / k, and half of it: Carslaw and Jaeger 1959, section 10.5.
    centre, corner = values(solve(SQUARE_PAD), [(0.0, 0.0, 0.0), (0.5, 0.5, 0.0)], 1e-12)
    assert centre == pytest.approx(2 * math.log(1 + math.sqrt(2)) / math.pi, rel=1e-14)
    assert corner == pytest.approx(centre / 2, rel=1e-14)


def scale_at(pad: OpenPad, place: Place) -> float:
    """What turns a potential into a flux: largest sqrt(k k_max) / distance from the pad's borders, over the axes."""
    where, largest = pad.where, max(pad.conductivity)
    marks = ((0.0, where.p_low, where.p_high), (0.0, where.q_low, where.q_high), (0.0,))
    least = [min((abs(c - mark) for mark in of if c != mark), default=1.0) for c, of in zip(place, marks, strict=True)]
    return max(math.sqrt(k * largest) / distance for k, distance in zip(pad.conductivity, least, strict=True))


@pytest.mark.parametrize("seed", SEEDS)
def test_no_value_is_further_off_than_its_bound(seed: int) -> None:
    pad = random_pad(seed)
    solution = solve(pad.body())
    for name, place in places_of(pad, seed).items():
        potential, flux = pad.potential_and_flux(place)
        found = solution.field_at(np.array([place]), tolerance=1e-9 * solution.span, with_flux=True)
        assert found.flux is not None
        assert found.flux_bound is not None
        error = float(abs(potential - mpf(float(found.potential[0]))))
        assert error <= found.potential_bound, name
        assert found.potential_bound <= max(WIDEST * error, 1e-9 * solution.span), name
        flux_error = max(float(abs(a - mpf(float(b)))) for a, b in zip(flux, found.flux[:, 0], strict=True))
        assert flux_error <= found.flux_bound[0], name
        assert found.flux_bound[0] <= max(WIDEST * flux_error, 1e-9 * solution.span * scale_at(pad, place)), name


@pytest.mark.parametrize("sign", [1.0, -1.0], ids=["insulated", "held"])
def test_quarter_space_is_a_half_space_with_an_image(sign: float) -> None:
    where, image = Rectangle(0.2, 0.7, -0.3, 0.9), Rectangle(-0.7, -0.2, -0.3, 0.9)
    pad = FaceMap.patches((ENDLESS, ENDLESS), 0.0, [Patch(where, 1.0)], begins=(0.0, -ENDLESS))
    faces: dict[Face, Condition] = {"x_low": INSULATED if sign > 0 else held(0.0), "z_low": Inflow(pad)}
    quarter = Body((ENDLESS,) * 3, (1.0, 2.0, 0.5), faces, infinite=(False, True, False))
    both = half_space(Inflow(on_open_face((where, 1.0), (image, sign))), quarter.conductivity)
    places = np.array([(0.3, 0.2, 0.0), (0.0, 0.2, 0.7), (0.2 + 1e-7, 0.1, 0.0), (40.0, -3.0, 9.0)])
    found, expected = (solve(body).field_at(places, tolerance=ACCURACY, with_flux=True) for body in (quarter, both))
    np.testing.assert_allclose(found.potential, expected.potential, rtol=0, atol=ROUNDING)
    assert found.flux is not None
    assert expected.flux is not None
    np.testing.assert_allclose(found.flux, expected.flux, rtol=0, atol=1e-12)


@pytest.mark.parametrize("place", [(0.1, 0.2, 0.3), (2.0, -1.0, 0.5)], ids=str)
def test_film_on_an_open_face_against_the_time_integral_by_mpmath(place: Place) -> None:
    # H = 3, ambient 1 on the square: two integrals of the Gauss function and the kernel of a film, Carslaw and Jaeger
    # 1959, section 14.2, by Gauss-Legendre quadrature in ln t; beyond exp(30) the integrand is below exp(-45).
    found = values(solve(half_space(Film(3.0, on_open_face((SQUARE, 1.0))))), [place], 1e-13)[0]
    with mp.workdps(34):
        x, y, z = (mpf(value) for value in place)

        def spread(c: mpf, t: mpf) -> mpf:
            root = 2 * mp.sqrt(t)
            return (mp.erf((0.5 - c) / root) + mp.erf((0.5 + c) / root)) / 2

        def integrand(s: mpf) -> mpf:
            t = mp.exp(s)
            given = mp.exp(-z * z / (4 * t)) / mp.sqrt(mp.pi * t)
            returned = 3 * mp.exp(3 * z + 9 * t + mp.log(mp.erfc(z / (2 * mp.sqrt(t)) + 3 * mp.sqrt(t))))
            return t * spread(x, t) * spread(y, t) * 3 * (given - returned)

        expected = float(mp.quad(integrand, mp.linspace(-8, 30, 20), method="gauss-legendre", maxdegree=4))
    assert found == pytest.approx(expected, rel=0, abs=1e-12)


def test_eighth_space_shows_a_quarter_of_the_pad() -> None:
    pad = FaceMap.patches((ENDLESS, ENDLESS), 0.0, [Patch(Rectangle(0.0, 0.5, 0.0, 0.5), 1.0)])
    faces: dict[Face, Condition] = {"x_low": INSULATED, "y_low": INSULATED, "z_low": Inflow(pad)}
    eighth = solve(Body((ENDLESS,) * 3, UNIT, faces))
    places = [(0.0, 0.0, 0.0), (0.25, 0.1, 0.0), (3.0, 0.0, 2.0)]
    np.testing.assert_allclose(values(eighth, places), values(solve(SQUARE_PAD), places), rtol=0, atol=ROUNDING)


def test_faces_of_a_quarter_space_held_at_two_values_meet_in_an_angle() -> None:
    # u = 2 theta / pi, the angle from the cold face.
    body = Body((ENDLESS,) * 3, UNIT, {"x_low": held(1.0), "z_low": held(0.0)}, infinite=(False, True, False))
    places = [(1.0, 0.0, 1.0), (1.0, -7.0, 2.0), (1e-3, 4.0, 3.0), (1e5, 0.0, 1.0)]
    expected = [2 / math.pi * math.atan2(z, x) for x, _, z in places]
    np.testing.assert_allclose(values(solve(body), places), expected, rtol=0, atol=ROUNDING)


def test_generation_in_a_cube_of_an_infinite_body() -> None:
    # 4 pi u at the centre of a unit cube is 3 ln(2 + sqrt 3) - pi / 2, and half of it at its corners; from far it is a
    # point: MacMillan, The Theory of the Potential, 1930, section 43 (from memory).
    box = BoxSource((-0.5,) * 3, (0.5,) * 3, 1.0)
    solution = solve(Body((ENDLESS,) * 3, UNIT, {}, (box,), infinite=ALL_SPACE))
    centre = (3 * math.log(2 + math.sqrt(3)) - math.pi / 2) / (4 * math.pi)
    found = values(solution, [(0.0, 0.0, 0.0), (0.5, -0.5, 0.5), (0.0, 1e7, 0.0)], 1e-13)
    np.testing.assert_allclose(found, [centre, centre / 2, 1 / (4e7 * math.pi)], rtol=0, atol=ROUNDING)
    books = solution.balance(tolerance=1e-10)
    assert books.carried_off is not None
    assert books.carried_off.value == pytest.approx(1.0, abs=books.carried_off.error_bound)
    assert books.closed


WIDE = 40.0


def widened(condition: Condition) -> Condition:
    """A condition on the open face as the same on a face of 40 by 40 about the origin."""
    match condition:
        case (
            Inflow(inflow=FaceMap(extent=None)) | Held(value=FaceMap(extent=None)) | Film(ambient=FaceMap(extent=None))
        ):
            return condition
        case Inflow(inflow=data):
            return Inflow(_widened(data))
        case Held(value=data):
            return Held(_widened(data))
        case Film(coefficient=coefficient, ambient=data):
            return Film(coefficient, _widened(data))
        case _:
            return condition


def _widened(data: FaceMap) -> FaceMap:
    ends = {-ENDLESS: 0.0, ENDLESS: WIDE}
    knots = [[ends.get(float(k), float(k) + WIDE / 2) for k in some] for some in (data.first_knots, data.second_knots)]
    if data.bilinear:
        return FaceMap.readings((WIDE, WIDE), knots[0], knots[1], data.table.tolist())
    cells = [
        Patch(Rectangle(*knots[0][i : i + 2], *knots[1][j : j + 2]), float(value))
        for (i, j), value in np.ndenumerate(data.table)
    ]
    return FaceMap.patches((WIDE, WIDE), data.usual, cells)


TENT = FaceMap.readings(
    (ENDLESS, ENDLESS), [-1, 0, 2], [0, 1, 2], [[1, 1, 1], [1, 5, 2], [1, 1, 1]], extend=True, begins=OPEN
)
PLATES = {
    "held base": plate(held(0.0), Inflow(on_open_face((SQUARE, 1.0)))),
    "film base, inflow all over": plate(film(3.0, 1.0), Inflow(on_open_face((SQUARE, 4.0), background=1.0))),
    "held pads on a film": plate(Held(on_open_face((SQUARE, 4.0), background=1.0)), film(3.0, 0.5)),
    "readings that go on as they end": plate(Film(4.0, TENT), Inflow(TENT)),
}


@pytest.mark.parametrize("name", PLATES)
def test_wide_plate_is_the_limit_of_a_large_one(name: str) -> None:
    # The slowest mode falls by exp(-x sqrt(rate)), rate > 1.4 here: 1e-10 of the edges is left at the middle of 40.
    body = PLATES[name]
    large = Body((WIDE, WIDE, 1.0), UNIT, all_insulated(**{f: widened(c) for f, c in body.faces.items()}))
    places = [(0.1, 0.2, 1.0), (0.5, 0.3, 0.6), (-1.0, 1.5, 0.0), (2.0, -0.5, 0.3)]
    shifted = [(x + WIDE / 2, y + WIDE / 2, z) for x, y, z in places]
    np.testing.assert_allclose(values(solve(body), places), values(solve(large), shifted), rtol=0, atol=2e-9)


def test_far_along_a_plate_its_background_is_left() -> None:
    solution = solve(PLATES["film base, inflow all over"])
    # Inflow of 1 through the film of 3 onto an ambient of 1, and through a thickness of 1.
    found = values(solution, [(1e5, 0.0, 0.0), (0.0, -300.0, 1.0)], 1e-11)
    np.testing.assert_allclose(found, [4 / 3, 7 / 3], rtol=0, atol=1e-11 * solution.span)
    (cause,) = solution.face_total("z_low", tolerance=1e-9).causes
    assert (cause.kind, cause.line) == ("endless_plane", "face z_low")
    assert cause.coefficient == pytest.approx(-1.0, abs=1e-9)
    (cause,) = solution.plane_total(2, 0.5, Rectangle(-2.0, 2.0, -ENDLESS, ENDLESS), tolerance=1e-9).causes
    assert cause.kind == "endless"
    assert cause.coefficient == pytest.approx(-4.0, abs=1e-9)
    coldest = solution.extremes(tolerance=1e-8).coldest
    assert math.inf in map(abs, coldest.position)
    assert coldest.value == pytest.approx(4 / 3, abs=coldest.error_bound)
    assert "far along" in coldest.where


# Square contacts of a thousandth of the spacing: all their moments up to the third are those of points.
CONTACT = 2.0**-10


def contact(x: float, y: float, current: float) -> tuple[Rectangle, float]:
    """A current into a small square."""
    w = CONTACT
    return Rectangle(x - w, x + w, y - w, y + w), current / (4 * w * w)


def voltage(solution: Solution, first: Place, second: Place) -> float:
    """Difference of the potential of two places."""
    one, other = values(solution, [first, second])
    return float(one - other)


def test_four_point_probe_on_an_infinite_sheet() -> None:
    # V / I = ln 2 / (pi k t) for equal spacings: Smits, Bell System Technical Journal 37, 1958.
    thickness = 0.01
    probes = on_open_face(contact(-1.5, 0.0, 1.0), contact(1.5, 0.0, -1.0))
    solution = solve(plate(INSULATED, Inflow(probes), thickness))
    found = voltage(solution, (-0.5, 0.0, thickness), (0.5, 0.0, thickness))
    assert found * thickness == pytest.approx(math.log(2) / math.pi, rel=1e-10)
    assert finite(solution.plane_total(0, 0.0, tolerance=1e-8)) == pytest.approx(1.0, abs=1e-8)


def test_conductances_of_the_layers_of_a_sheet_add_up() -> None:
    # Far from the contacts, in terms of the thickness and of how far what crosses between layers spreads, all layers
    # are at one potential: ln 2 / (pi sum of k t).
    layers = [
        Layer(0.01, (10.0,) * 3),
        Layer(0.002, (1.0,) * 3, contact_below=500.0),
        Layer(0.02, (3.0,) * 3),
    ]
    probes = on_open_face(contact(-1.5, 0.0, 1.0), contact(1.5, 0.0, -1.0))
    faces: dict[Face, Condition] = {"z_low": INSULATED, "z_high": Inflow(probes)}
    sheet = Body.stack((ENDLESS, ENDLESS), layers, faces, infinite=HALF_SPACE)
    found = voltage(solve(sheet), (-0.5, 0.0, 0.0), (0.5, 0.0, 0.032))
    assert found * (0.1 + 0.002 + 0.06) == pytest.approx(math.log(2) / math.pi, rel=1e-9)


@pytest.mark.parametrize("name", PLATES)
def test_wide_plate_of_layers_of_one_material_is_the_plate_itself(name: str) -> None:
    body = PLATES[name]
    layers = [Layer(thickness, UNIT) for thickness in (0.3, 0.2, 0.5)]
    stack = Body.stack((ENDLESS, ENDLESS), layers, body.faces, infinite=HALF_SPACE)
    places = [(0.1, 0.2, 1.0), (0.5, 0.3, 0.6), (-1.0, 1.5, 0.0), (30.0, -0.5, 0.3)]
    np.testing.assert_allclose(values(solve(stack), places), values(solve(body), places), rtol=0, atol=1e-9)


def test_hundred_pads_add_up() -> None:
    # More breaks along an axis than are told apart singly, against the closed form of each pad.
    rng = np.random.default_rng(7)
    wheres = [Rectangle(2.0 * i, 2.0 * i + 1.3, 2.0 * j, 2.0 * j + 0.9) for i in range(10) for j in range(10)]
    flows = rng.uniform(0.5, 2.0, len(wheres))
    solution = solve(half_space(Inflow(on_open_face(*zip(wheres, flows.tolist(), strict=True)))))
    places = [(0.3, 0.7, 0.0), (9.7, 10.95, 1e-3), (1.6, 1.5, 0.0), (1e4, 3.0, 2.0)]
    pads = [OpenPad(UNIT, ("infinite", "infinite"), where, is_held=False) for where in wheres]
    expected = [
        float(sum(flow * pad.potential_and_flux(place)[0] for flow, pad in zip(flows.tolist(), pads, strict=True)))
        for place in places
    ]
    found = solution.field_at(np.array(places), tolerance=1e-9 * solution.span)
    np.testing.assert_allclose(found.potential, expected, rtol=0, atol=found.potential_bound)


def test_four_point_probe_on_a_half_space() -> None:
    # V / I = 1 / (2 pi k s): Valdes, Proceedings of the IRE 42, 1954.
    probes = on_open_face(contact(-1.5, 0.0, 1.0), contact(1.5, 0.0, -1.0))
    found = voltage(solve(half_space(Inflow(probes))), (-0.5, 0.0, 0.0), (0.5, 0.0, 0.0))
    # A square is seen as its centre but for (its half side / distance)^2 / 4, on the surface of a half-space.
    assert found == pytest.approx(1 / (2 * math.pi), rel=CONTACT**2)


def test_four_contacts_on_the_edge_of_a_half_sheet() -> None:
    # exp(-pi k t R1) + exp(-pi k t R2) = 1: van der Pauw, Philips Research Reports 13, 1958.
    thickness, edge = 0.01, (-2.0, -0.7, 0.4, 3.0)

    def resistance(currents: tuple[int, int], probes: tuple[int, int]) -> float:
        w = CONTACT
        pads = [
            Patch(Rectangle(0.0, w, edge[index] - w, edge[index] + w), sign / (2 * w * w))
            for index, sign in zip(currents, (1.0, -1.0), strict=True)
        ]
        inflow = Inflow(FaceMap.patches((ENDLESS, ENDLESS), 0.0, pads, begins=(0.0, -ENDLESS)))
        faces: dict[Face, Condition] = {"x_low": INSULATED, "z_low": INSULATED, "z_high": inflow}
        body = Body((ENDLESS, ENDLESS, thickness), UNIT, faces, infinite=(False, True, False))
        first, second = ((0.0, edge[index], 0.0) for index in probes)
        return voltage(solve(body), first, second) * thickness

    # Current between neighbouring contacts, voltage between the two others, and once round.
    one, other = resistance((0, 1), (3, 2)), resistance((1, 2), (0, 3))
    assert math.exp(-math.pi * one) + math.exp(-math.pi * other) == pytest.approx(1.0, abs=1e-10)


def test_strips_that_balance_have_the_field_of_two_lines_of_sources() -> None:
    # u = -1 / pi times the integral of ln |r - r'| over each strip, in closed form.
    strips = (Rectangle(-1.5, -0.5, *OPEN_AXIS), 1.0), (Rectangle(0.5, 1.5, *OPEN_AXIS), -1.0)
    solution = solve(half_space(Inflow(on_open_face(*strips))))

    def of_strip(x: float, z: float, low: float, high: float) -> float:
        def integral(s: float) -> float:
            return s * math.log(math.hypot(s, z)) - s + z * math.atan2(s, z)

        return -(integral(high - x) - integral(low - x)) / math.pi

    places = [(-1.0, 0.0, 0.1), (1.2, 70.0, 0.4), (0.3, -1.0, 25.0)]
    expected = [of_strip(x, z, -1.5, -0.5) - of_strip(x, z, 0.5, 1.5) for x, _, z in places]
    np.testing.assert_allclose(values(solution, places), expected, rtol=0, atol=1e-13)
    (cause,) = solution.plane_total(0, 0.0, tolerance=1e-9).causes
    assert cause.kind == "endless"
    assert cause.coefficient == pytest.approx(1.0, abs=1e-9)
    assert finite(solution.face_total("z_low", tolerance=1e-9)) == 0.0


@pytest.mark.parametrize("shift", [0.0, -37.0])
def test_bar_without_ends_falls_between_what_goes_in_and_out(shift: float) -> None:
    # 0.4 in at 0.5 and out at 4.5: 0.4 * 4 / 2 above and below the mean of both far values.
    pads = [
        Patch(Rectangle(shift, 1.0 + shift, 0.2, 0.6), 1.0),
        Patch(Rectangle(4.0 + shift, 5.0 + shift, 0.2, 0.6), -1.0),
    ]
    faces = all_insulated(z_high=Inflow(FaceMap.patches((ENDLESS, 1.0), 0.0, pads, begins=(-ENDLESS, 0.0))))
    del faces["x_low"], faces["x_high"]
    solution = solve(Body((ENDLESS, 1.0, 1.0), UNIT, faces, infinite=(True, False, False)))
    found = values(solution, [(-1e3, 0.2, 0.7), (1e3, 0.1, 0.4), (2.5 + shift, 0.5, 0.5)])
    np.testing.assert_allclose(found, [0.8, -0.8, 0.0], rtol=0, atol=1e-13)
    assert finite(solution.plane_total(0, 2.5 + shift, tolerance=1e-9)) == pytest.approx(0.4, abs=1e-10)
    places = np.array([(0.5 + shift, 0.4, 0.5), (6.0 + shift, 0.1, 0.2)])
    certificate = solution.certificate(places, 1e-9, tolerance=1e-10)
    assert certificate.checked_places == 2
    assert certificate.agreement is not None
    assert certificate.agreement < 1e-12


@pytest.mark.parametrize("axis", [0, 1])
def test_endless_axis_may_be_any(axis: int) -> None:
    # The same bar with a film end, along z and along another axis.
    data = [Patch(Rectangle(0.2, 0.6, 1.0, 2.0), 1.0)]
    along_z = all_insulated(z_low=film(2.0, 1.0), x_high=Inflow(FaceMap.patches((1.5, ENDLESS), 0.0, data)))
    del along_z["z_high"]
    bar = Body((1.0, 1.5, ENDLESS), (1.0, 2.0, 0.5), along_z)
    # A cycle of the axes takes z to `axis`, y before it and x before that.
    order = [(axis + shift) % 3 for shift in (1, 2, 0)]

    def cycled(of: Sequence[float]) -> tuple[float, float, float]:
        moved = [0.0, 0.0, 0.0]
        for number, place in zip(order, of, strict=True):
            moved[number] = place
        return moved[0], moved[1], moved[2]

    where = Rectangle(0.2, 0.6, 1.0, 2.0)
    first, _ = axes_along(order[0])
    extent: tuple[float, float] = (1.5, ENDLESS)
    if first != order[1]:
        where, extent = Rectangle(1.0, 2.0, 0.2, 0.6), (ENDLESS, 1.5)
    names = {number: AXES[place] for number, place in enumerate(order)}
    faces = all_insulated()
    faces[f"{names[2]}_low"] = film(2.0, 1.0)  # type: ignore[index]
    faces[f"{names[0]}_high"] = Inflow(FaceMap.patches(extent, 0.0, [Patch(where, 1.0)]))  # type: ignore[index]
    del faces[f"{names[2]}_high"]  # type: ignore[arg-type]
    turned = solve(Body(cycled(bar.size), cycled(bar.conductivity), faces))
    places = [(1.0, 0.4, 1.5), (0.2, 1.1, 0.0), (0.5, 0.5, 30.0)]
    found, expected = values(turned, [cycled(place) for place in places]), values(solve(bar), places)
    np.testing.assert_allclose(found, expected, rtol=0, atol=ROUNDING)
    face: Face = f"{names[2]}_low"  # type: ignore[assignment]
    assert finite(turned.face_total(face, tolerance=1e-9)) == pytest.approx(-0.4, abs=1e-10)


def test_all_that_flows_in_passes_every_plane_below() -> None:
    solution = solve(SQUARE_PAD)
    for depth in (1e-3, 0.5, 40.0):
        total = solution.plane_total(2, depth, tolerance=1e-9)
        assert total.error_bound is not None
        assert finite(total) == pytest.approx(1.0, abs=total.error_bound)
    # By symmetry half of it crosses a plane beside the pad.
    assert finite(solution.plane_total(0, 0.5, tolerance=1e-9)) == pytest.approx(0.5, abs=1e-9)


def test_mean_and_flow_of_a_rectangle_are_integrals_of_the_closed_form() -> None:
    asked = Rectangle(0.75, 1.5, -0.25, 0.5)
    nodes, weights = np.polynomial.legendre.leggauss(12)
    x, y = 1.125 + 0.375 * nodes, 0.125 + 0.375 * nodes
    share = np.outer(weights, weights) / 4
    pad = OpenPad(UNIT, ("infinite", "infinite"), SQUARE, is_held=False)
    on_face = [[float(pad.potential_and_flux((a, b, 0.0))[0]) for b in y] for a in x]
    below = [[float(pad.potential_and_flux((a, b, 0.8))[1][2]) for b in y] for a in x]
    solution = solve(SQUARE_PAD)
    mean = solution.mean("z_low", asked, tolerance=1e-12)
    assert mean.value == pytest.approx(float(np.sum(share * on_face)), rel=1e-11)
    total = solution.plane_total(2, 0.8, asked, tolerance=1e-12)
    assert finite(total) == pytest.approx(float(np.sum(share * below)) * asked.area, rel=1e-11)


def test_what_a_held_pad_gives_returns_beside_it() -> None:
    solution = solve(half_space(Held(on_open_face((SQUARE, 1.0)))))
    assert finite(solution.face_total("z_low", tolerance=1e-9)) == pytest.approx(0.0, abs=1e-9)
    assert solution.balance(tolerance=1e-9).closed
    causes = solution.face_total("z_low", SQUARE, tolerance=1e-9).causes
    assert [cause.kind for cause in causes] == ["jump_line"] * 4


def test_inflow_leaves_through_a_face_that_takes_it_up() -> None:
    pad = FaceMap.patches((ENDLESS, ENDLESS), 0.0, [Patch(Rectangle(0.2, 0.7, -0.3, 0.9), 1.0)], begins=(0.0, -ENDLESS))
    for side in (held(0.0), film(0.3, 0.0)):
        faces: dict[Face, Condition] = {"x_low": side, "z_low": Inflow(pad)}
        solution = solve(Body((ENDLESS,) * 3, UNIT, faces, infinite=(False, True, False)))
        books = solution.balance(tolerance=1e-9)
        assert books.inflow["x_low"].value == pytest.approx(-0.6, abs=1e-9)
        assert books.closed
        assert books.carried_off is None


def test_coldest_place_of_a_half_space_is_far_away() -> None:
    hottest, coldest = (extremes := solve(SQUARE_PAD).extremes(tolerance=1e-8)).hottest, extremes.coldest
    assert hottest.position == pytest.approx((0.0, 0.0, 0.0), abs=1e-4)
    assert hottest.value == pytest.approx(2 * math.log(1 + math.sqrt(2)) / math.pi, abs=hottest.error_bound)
    assert coldest.value == 0.0
    assert math.isinf(coldest.position[0])


def test_potential_far_from_a_pad_is_that_of_a_point() -> None:
    # 1 / (2 pi r) and, from the second moments 1 / 12 along x and y, (3 / 24 - 1 / 12) / (2 pi r^3) more along x.
    distance = 1e3
    (found,) = values(solve(SQUARE_PAD), [(distance, 0.0, 0.0)], 1e-13)
    point = 1 / (2 * math.pi * distance)
    assert found == pytest.approx(point * (1 + 1 / (24 * distance**2)), rel=1e-11)


NO_STEADY_STATE: dict[str, tuple[Body, str]] = {
    "inflow all over a half-space": (half_space(Inflow(FaceMap.uniform(1.0))), "goes on without end along x and y"),
    "a strip": (
        half_space(Inflow(on_open_face((Rectangle(-0.5, 0.5, *OPEN_AXIS), 1.0)))),
        "far along the y axis, where the inflow and generation per length come to 1;",
    ),
    "strips that turn over half way": (
        half_space(Inflow(on_open_face((Rectangle(0, 1, -ENDLESS, 0), 1.0), (Rectangle(0, 1, 0, ENDLESS), -1.0)))),
        "far along the y axis",
    ),
    "a pad on an insulated sheet": (
        plate(INSULATED, Inflow(on_open_face((SQUARE, 3.0)))),
        "add up to 3, which can only spread in two dimensions",
    ),
    "a strip on an insulated sheet": (
        plate(INSULATED, Inflow(on_open_face((Rectangle(-0.5, 0.5, *OPEN_AXIS), 1.0)))),
        "goes on without end along y",
    ),
    "generation along half of an insulated bar": (
        Body(
            (ENDLESS, 1.0, 1.0),
            UNIT,
            dict.fromkeys(("y_low", "y_high", "z_low", "z_high"), INSULATED),
            (BoxSource((0.0, 0.0, 0.0), (ENDLESS, 0.5, 1.0), 2.0),),
            infinite=(True, False, False),
        ),
        "far along the x axis, where the inflow and generation per length come to 1;",
    ),
}


@pytest.mark.parametrize("name", NO_STEADY_STATE)
def test_flow_that_nothing_carries_away_has_no_steady_field(name: str) -> None:
    body, sentence = NO_STEADY_STATE[name]
    with pytest.raises(NoSteadyState, match=sentence):
        solve(body)


def test_strip_beside_a_face_that_takes_up_its_flow_has_a_field() -> None:
    # Sources along a line at distance d from a plane held at 0, its image behind: ln(r' / r) / (pi k) on the surface.
    w = CONTACT
    line = FaceMap.patches(
        (ENDLESS, ENDLESS), 0.0, [Patch(Rectangle(1 - w, 1 + w, *OPEN_AXIS), 1 / (2 * w))], begins=(0.0, -ENDLESS)
    )
    faces: dict[Face, Condition] = {"x_low": held(0.0), "z_low": Inflow(line)}
    solution = solve(Body((ENDLESS,) * 3, UNIT, faces, infinite=(False, True, False)))
    (found,) = values(solution, [(3.0, 12.0, 0.0)])
    assert found == pytest.approx(math.log(2.0) / math.pi, abs=w**2)


def test_slab_of_generation_under_a_film_is_one_dimensional() -> None:
    # 1 in 1 < z < 2 above a film of 2: 1 / 2 at the face, a straight line to the slab, and constant below it.
    slab = BoxSource((-ENDLESS, -ENDLESS, 1.0), (ENDLESS, ENDLESS, 2.0), 1.0)
    body = Body((ENDLESS,) * 3, UNIT, {"z_low": film(2.0, 0.0)}, (slab,), infinite=HALF_SPACE)
    found = values(solve(body), [(0.0, 3.0, 0.0), (0.0, 0.0, 0.5), (1e3, 2.0, 7.0)], 1e-11)
    np.testing.assert_allclose(found, [0.5, 1.0, 2.0], rtol=0, atol=2e-11)


def test_plate_that_hardly_loses_anything_spreads_as_a_bessel_function() -> None:
    # Biot number Bi: K_0(r sqrt Bi) / (2 pi k t) but for a part of the order of Bi and of the pad's size / r, squared.
    biot, distance = 1e-9, 1e4
    solution = solve(plate(film(biot, 0.0), Inflow(on_open_face((SQUARE, 1.0)))))
    (found,) = values(solution, [(distance, 0.0, 0.3)])
    assert found == pytest.approx(k0(distance * math.sqrt(biot)) / (2 * math.pi), rel=2 * biot + distance**-2)
    assert solution.balance(tolerance=1e-9).closed


def test_body_without_ends_has_no_faces_there() -> None:
    body = SQUARE_PAD
    assert body.present_faces == ("z_low",)
    with pytest.raises(NotPhysical, match="A body that is without ends along x has no face x_low"):
        Body(body.size, UNIT, {**body.faces, "x_low": INSULATED}, infinite=HALF_SPACE)
    with pytest.raises(NotPhysical, match="A body that is semi-infinite along z has no face z_high"):
        Body(body.size, UNIT, {**body.faces, "z_high": INSULATED}, infinite=HALF_SPACE)
    with pytest.raises(NotPhysical, match="no ends along x, and yet its size there is 2"):
        Body((2.0, ENDLESS, ENDLESS), UNIT, body.faces, infinite=HALF_SPACE)
    with pytest.raises(NotPhysical, match="begins at"):
        Body((ENDLESS,) * 3, UNIT, {"x_low": INSULATED, **body.faces}, infinite=(False, True, False))
    with pytest.raises(OutsideBody, match="reaches from 0 to inf along z"):
        values(solve(body), [(-5.0, -5.0, -1.0)])
    with pytest.raises(NotPhysical, match="mean over a side without end"):
        solve(body).mean("z_low", tolerance=1e-9)


def test_convergence_and_certificate_do_without_a_series_where_there_is_none() -> None:
    solution = solve(SQUARE_PAD)
    certificate = solution.certificate(np.array([(0.0, 0.0, 0.0)]), 1e-9, tolerance=1e-9)
    assert certificate.agreement is None
    (answer,) = solution.convergence(np.array([(0.2, 0.1, 0.3)]), tolerance=1e-9)
    assert answer.series == ()
    assert answer.terms_needed is None
    assert [step.error <= step.error_bound + answer.error_bound for step in answer.time_form] == [True] * 6


@pytest.mark.parametrize("unit", [1e-6, 1.0, 1e6])
def test_influence_of_pads_of_any_size_and_distance_on_a_half_space(unit: float) -> None:
    # The mean of a square over itself as published, and points seen from a thousand and from ten million sides away;
    # of unit squares in a row the mean of 1 / r exceeds 1 / distance by 1 / 12 of its cube, from the second moments.
    pads = [Pad("z_low", Rectangle(x * unit, (x + 1) * unit, 0.0, unit)) for x in (0.0, 1e3, 1e7)]
    found = influence(half_space(INSULATED), pads, tolerance=1e-9 / unit)
    mean, bound = found.mean * unit, found.bound * unit
    assert mean[0, 0] == pytest.approx(0.473201004409339, abs=1e-13)
    assert mean[0, 1] == pytest.approx((1e-3 + 1e-9 / 12) / (2 * math.pi), abs=1e-15)
    assert mean[0, 2] == pytest.approx(1e-7 / (2 * math.pi), abs=1e-15)
    assert bound.max() < 1e-11
