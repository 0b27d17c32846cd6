"""Bodies whose conductivity varies with the potential and faces that radiate.

Expected values: closed forms of one-dimensional problems (Carslaw and Jaeger 1959, section 1.6), roots found by scipy,
finite elements for the potential itself, and answers with tighter bounds.
"""

from __future__ import annotations

import math
import tracemalloc
from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.optimize import brentq

from service.core import (
    AccuracyNotReached,
    Body,
    BoxSource,
    Condition,
    ConductivityLaw,
    FaceMap,
    Film,
    Grid,
    Held,
    Inflow,
    Insulated,
    Interrupted,
    Layer,
    NotPhysical,
    OutsideLaw,
    Patch,
    Radiation,
    Rectangle,
    solve,
)
from service.core.estimate import Estimate
from service.core.formula import read
from service.core.formula_map import of_formula
from service.core.laws import Kirchhoff
from service.core.preparation import estimate
from tests.core.bodies import all_held, all_insulated, film, held, pad
from tests.core.reference.varying_elements import FilmData, VaryingCase, solve_varying

FloatArray = NDArray[np.float64]

UNIT = (1.0, 1.0, 1.0)
SIGMA = 5.670374419e-8  # W/(m^2 K^4), CODATA 2018
B = -5e-4
FALLING = ConductivityLaw.linear(20.0, B)
TABLE = ConductivityLaw.table([0.0, 200.0, 400.0, 800.0], [1.0, 0.92, 0.86, 0.75])
TABLE_WITH_KINK = ConductivityLaw.table([0.0, 50.0, 100.0], [1.0, 0.9, 0.95])
GLOW = Radiation(0.8 * SIGMA, 273.15)
PLACES = np.array([(0.3, 0.4, 0.5), (0.1, 0.9, 1.0), (1.0, 0.3, 0.2), (0.77, 0.21, 0.02)])


def theta(u: float) -> float:
    """Integral of the falling law from 20, written out."""
    return (u - 20) + B / 2 * (u - 20) ** 2


def potential(t: float) -> float:
    """Its inverse, by the formula for a quadratic equation."""
    return 20 + (math.sqrt(1 + 2 * B * t) - 1) / B


def slab(
    low: Condition, high: Condition, law: ConductivityLaw | None = FALLING, sources: tuple[BoxSource, ...] = ()
) -> Body:
    """A cube of conductivity 2 with insulated sides."""
    return Body(UNIT, (2.0, 2.0, 2.0), all_insulated(z_low=low, z_high=high), sources, law=law)


def inflow(value: float) -> Inflow:
    return Inflow(FaceMap.uniform(value))


def along_z(*heights: float) -> FloatArray:
    return np.array([(0.3, 0.6, z) for z in heights])


@pytest.mark.parametrize(
    "law", [FALLING, ConductivityLaw.linear(100.0, 2e-3), TABLE], ids=["falling", "rising", "table"]
)
@pytest.mark.parametrize("reference", [20.0, 0.0, 333.0, 800.0])
def test_transformation_is_the_integral_of_the_law_and_its_inverse_undoes_it(
    law: ConductivityLaw, reference: float
) -> None:
    kirchhoff = Kirchhoff(law, reference)
    places = np.linspace(0.0, 800.0, 33)
    for place, found in zip(places, kirchhoff.theta(places), strict=True):
        inside = [node for node in law.nodes if min(reference, place) < node < max(reference, place)]
        expected = quad(lambda u: np.interp(u, law.nodes, law.factors), reference, place, points=inside or None)[0]
        if law is not TABLE:
            # Outside their two nodes linear laws go on; the midpoint is exact for them.
            expected = (place - reference) * float(kirchhoff.factor(np.array(0.5 * (place + reference))))
        assert found == pytest.approx(expected, rel=1e-12, abs=1e-10)
    assert kirchhoff.potential(kirchhoff.theta(places)) == pytest.approx(places, rel=1e-13, abs=1e-10)
    assert kirchhoff.theta(np.array(reference)) == 0.0


def test_slab_between_two_temperatures_carries_the_conductivity_at_their_mean() -> None:
    """Carslaw and Jaeger 1959, section 1.6: flux k_mean (T1 - T2) / L, T by a quadratic equation at every depth."""
    solution = solve(slab(held(100.0), held(700.0)))
    heights = (0.0, 0.25, 0.5, 0.9, 1.0)
    found = solution.field_at(along_z(*heights), tolerance=1e-9 * 600, with_flux=True)
    expected = [potential(theta(100.0) + z * (theta(700.0) - theta(100.0))) for z in heights]
    assert np.abs(found.potential - expected).max() <= min(found.potential_bound, 1e-9 * 600)
    assert found.flux is not None
    mean_conductivity = 2.0 * (1 + B * (400.0 - 20.0))
    assert found.flux[2] == pytest.approx(-mean_conductivity * 600.0, rel=1e-12)
    total = solution.face_total("z_low", tolerance=1e-9)
    assert total.value == pytest.approx(-mean_conductivity * 600.0, rel=1e-12)
    assert solution.certificate(along_z(0.5), 1e-7, tolerance=1e-7).iterations == 0


@pytest.mark.parametrize("biot", [1e-9, 1e-3, 0.3, 1.0, 30.0, 1e3, 1e9])
def test_film_on_a_slab_of_any_biot_number(biot: float) -> None:
    coefficient = 2.0 * biot
    surface = brentq(
        lambda u: coefficient * (700.0 - u) - 2.0 * (theta(u) - theta(0.0)), 0.0, 700.0, xtol=1e-13, rtol=1e-15
    )
    solution = solve(slab(film(coefficient, 700.0), held(0.0)))
    found = solution.field_at(along_z(0.0, 0.4), tolerance=1e-8 * 700, with_flux=True)
    expected = [surface, potential(0.6 * theta(surface) + 0.4 * theta(0.0))]
    assert np.abs(found.potential - expected).max() <= found.potential_bound <= 1e-8 * 700
    flow = 2.0 * (theta(surface) - theta(0.0))
    total = solution.face_total("z_low", tolerance=1e-8 * 700)
    assert total.value is not None
    assert total.error_bound is not None
    assert abs(total.value - flow) <= total.error_bound
    assert found.flux is not None
    assert found.flux_bound is not None
    assert (np.abs(found.flux[2] - flow) <= found.flux_bound).all()
    mean = solution.mean("z_low", tolerance=1e-8 * 700)
    assert abs(mean.value - surface) <= mean.error_bound + 1e-12 * 700


@pytest.mark.parametrize("coefficient", [0.0, 5.0])
def test_radiating_face_gives_off_what_flows_in(coefficient: float) -> None:
    """Load q = h (T - 20) + 0.8 sigma (T_abs^4 - 293.15^4) on a plate of constant conductivity."""
    load, thickness = 5e4, 0.02
    face = Film(coefficient, FaceMap.uniform(20.0), GLOW)
    plate = all_insulated(z_low=inflow(load), z_high=face)
    solution = solve(Body((0.1, 0.1, thickness), (15.0, 15.0, 15.0), plate))
    surface = brentq(
        lambda u: coefficient * (u - 20) + 0.8 * SIGMA * ((u + 273.15) ** 4 - 293.15**4) - load, 0, 5000, xtol=1e-12
    )
    found = solution.field_at(np.array([(0.01, 0.02, 0.02), (0.01, 0.02, 0.0)]), tolerance=1e-6)
    expected = [surface, surface + load * thickness / 15.0]
    assert np.abs(found.potential - expected).max() <= found.potential_bound <= 1e-6
    mean = solution.mean("z_high", tolerance=1e-6)
    assert abs(mean.value - surface) <= mean.error_bound
    assert solution.extremes(tolerance=1e-5).hottest.value == pytest.approx(expected[1], abs=1e-5)


def test_radiation_into_the_cold_alone_is_found_from_far_away() -> None:
    """At the ambient of 10 K the face hardly gives off anything; it comes to (q / (0.8 sigma) + 10^4)^(1/4)."""
    face = Film(0.0, FaceMap.uniform(-263.15), GLOW)
    plate = all_insulated(z_low=inflow(1e6), z_high=face)
    solution = solve(Body((0.1, 0.1, 0.02), (15.0, 15.0, 15.0), plate))
    found = solution.field_at(np.array([(0.05, 0.05, 0.02)]), tolerance=1e-5)
    expected = (1e6 / (0.8 * SIGMA) + 10.0**4) ** 0.25 - 273.15
    assert abs(found.potential[0] - expected) <= found.potential_bound <= 1e-5


def test_generation_between_cold_faces_transforms_exactly() -> None:
    """theta of the middle is that of the faces plus g L^2 / 8 k."""
    density = 3000.0
    whole = BoxSource((0.0, 0.0, 0.0), UNIT, density)
    solution = solve(slab(held(50.0), held(50.0), sources=(whole,)))
    hottest = solution.extremes(tolerance=1e-7).hottest
    expected = potential(theta(50.0) + density / (8 * 2.0))
    assert abs(hottest.value - expected) <= hottest.error_bound <= 1e-7
    assert hottest.position[2] == pytest.approx(0.5, abs=1e-3)


def test_held_readings_are_read_off_again_exactly_in_theta() -> None:
    """The law is linear, so on the face itself the readings come back to rounding, between them too."""
    table = [[200, 200, 200], [200, 700, 200], [200, 200, 200]]
    face_map = FaceMap.readings(UNIT[:2], [0, 0.4, 1], [0, 0.5, 1], table)
    solution = solve(Body(UNIT, UNIT, all_held(200.0, z_low=Held(face_map)), law=FALLING))
    first, second = np.linspace(0.0, 1.0, 11), np.array([0.1, 0.5, 0.77])
    found = solution.field(Grid(first, second, np.zeros(1)), tolerance=1e-9 * 500)
    assert np.abs(found.potential[:, :, 0] - face_map.at(first, second)).max() <= found.potential_bound
    mean = solution.mean("z_low", tolerance=1e-6)
    assert mean.value == pytest.approx(200.0 + 500.0 / 4, rel=1e-12)
    assert solution.usual_accuracy == 1e-9


def test_agreement_of_both_forms_is_that_near_the_value_whatever_the_law_is_elsewhere() -> None:
    """The factor is 1e-12 at the cold end only; in the warm half both forms agree to the bound of the answer."""
    law = ConductivityLaw.table([0.0, 100.0], [1e-12, 1.0])
    faces = all_insulated(z_low=Held(pad(1.0, 1.0, 90.0, 100.0)), z_high=held(0.0))
    solution = solve(Body(UNIT, UNIT, faces, law=law))
    # At the cold end nothing better can be promised, so that this is what has to be asked for.
    found = solution.field_at(along_z(0.1), tolerance=100.0)
    assert found.potential_bound <= 1e-9
    checked = solution.certificate(along_z(0.1), found.potential_bound, tolerance=100.0)
    assert checked.agreement is not None
    assert checked.check_bound is not None
    assert checked.agreement <= checked.check_bound <= 1e-9


def test_many_readings_are_held_in_theta_with_little_memory_and_asking_on_the_way() -> None:
    """Noise of full rank: its square has twice as many products and takes no more than a few tables of its places."""
    count = 90
    even = np.linspace(0.0, 1.0, count)
    readings = FaceMap.readings(
        UNIT[:2], even.tolist(), even.tolist(), np.random.default_rng(4).uniform(30, 80, (count, count)).tolist()
    )
    tracemalloc.start()
    solution = solve(Body(UNIT, UNIT, all_insulated(z_low=Held(readings), z_high=held(20.0)), law=FALLING))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < min(12 * 8 * (7 * count) ** 2, estimate(solution.body).bytes)
    first, second = np.array([0.0, 0.31, 1.0]), np.array([0.05, 0.52])
    found = solution.field(Grid(first, second, np.zeros(1)), tolerance=1e-6)
    assert np.abs(found.potential[:, :, 0] - readings.at(first, second)).max() <= found.potential_bound

    bent = Body(UNIT, UNIT, all_insulated(z_low=Held(readings), z_high=held(60.0)), law=TABLE_WITH_KINK)
    asked: list[None] = []
    solve(bent, lambda: asked.append(None))
    assert len(asked) > 5


def test_film_of_many_readings_is_known_to_be_costly_before_it_is_iterated() -> None:
    noise = np.random.default_rng(4).uniform(30, 80, (100, 100))
    even = np.linspace(0.0, 1.0, 100).tolist()
    ambient = FaceMap.readings(UNIT[:2], even, even, noise.tolist())
    faces = all_insulated(z_low=Film(5.0, ambient, GLOW), z_high=held(20.0))
    assert estimate(Body(UNIT, UNIT, faces)).multiplications > 1e11
    faces = all_insulated(z_low=Film(5.0, FaceMap.uniform(40.0), GLOW), z_high=held(20.0))
    assert estimate(Body(UNIT, UNIT, faces)).multiplications < 1e7
    assert estimate(Body(UNIT, UNIT, all_insulated(z_low=Film(5.0, ambient)))) == Estimate(0.0, 0.0)


def test_formula_of_a_held_face_comes_back_with_its_error_in_the_bound() -> None:
    formula = of_formula(UNIT[:2], read("30 + 600*exp(-((x-0.4)/0.2)^2)*sin(pi*y)", ("x", "y")))
    solution = solve(Body(UNIT, UNIT, all_insulated(z_low=Held(formula), z_high=held(20.0)), law=FALLING))
    first, second = np.array([0.05, 0.33, 0.4]), np.array([0.2, 0.5])
    found = solution.field(Grid(first, second, np.zeros(1)), tolerance=1e-6)
    expected = 30 + 600 * np.exp(-(((first[:, None] - 0.4) / 0.2) ** 2)) * np.sin(np.pi * second)
    assert np.abs(found.potential[:, :, 0] - expected).max() <= found.potential_bound <= 1e-6
    mean = solution.mean("z_low", tolerance=1e-6)
    across = quad(lambda x: math.exp(-(((x - 0.4) / 0.2) ** 2)), 0.0, 1.0, epsabs=1e-14)[0]
    assert abs(mean.value - (30 + 600 * across * 2 / math.pi)) <= mean.error_bound + 1e-10


def test_table_of_one_straight_line_is_the_linear_law() -> None:
    table = ConductivityLaw.table([0.0, 300.0, 700.0], [1 + B * (u - 20) for u in (0.0, 300.0, 700.0)])
    faces = all_insulated(z_low=Held(pad(1.0, 1.0, 500.0, 100.0)), z_high=film(3.0, 20.0))
    first, second = (
        solve(Body(UNIT, UNIT, faces, law=law)).field_at(PLACES, tolerance=1e-6 * 480) for law in (FALLING, table)
    )
    assert np.abs(first.potential - second.potential).max() <= first.potential_bound + second.potential_bound


def test_law_of_factor_one_and_no_radiation_changes_nothing() -> None:
    faces = all_insulated(z_low=Film(5.0, pad(1.0, 1.0, 500.0, 20.0)), z_high=held(0.0))
    plain = solve(Body(UNIT, (2.0, 1.0, 3.0), faces)).field_at(PLACES, tolerance=1e-8, with_flux=True)
    lawful = solve(Body(UNIT, (2.0, 1.0, 3.0), faces, law=ConductivityLaw.constant()))
    found = lawful.field_at(PLACES, tolerance=1e-6, with_flux=True)
    assert np.abs(found.potential - plain.potential).max() <= found.potential_bound + plain.potential_bound
    assert found.flux is not None
    assert plain.flux is not None
    np.testing.assert_allclose(found.flux, plain.flux, rtol=0, atol=1e-5)


FACTORS: dict[str, Callable[[FloatArray], FloatArray]] = {
    "falling": lambda u: 1 + B * (u - 20),
    "table": lambda u: np.interp(u, TABLE.nodes, TABLE.factors),
    "one": lambda u: 1 + 0 * u,
}
BUMP = FaceMap.readings(UNIT[:2], [0, 0.5, 1], [0, 0.5, 1], [[20, 20, 20], [20, 620, 20], [20, 20, 20]])


def bump(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return 20 + 600 * (1 - np.abs(2 * x - 1)) * (1 - np.abs(2 * y - 1))


def spot(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return np.where((x > 1 / 3) & (x < 2 / 3) & (y > 1 / 3) & (y < 0.5), 1500.0, 0.0)


SPOT = FaceMap.patches(UNIT[:2], 0.0, [Patch(Rectangle(1 / 3, 2 / 3, 1 / 3, 0.5), 1500.0)])

ELEMENTS: dict[str, tuple[Body, VaryingCase, float]] = {
    "films with a mapped ambient, anisotropic": (
        Body(
            UNIT,
            (4.0, 2.0, 1.0),
            all_insulated(z_low=Film(6.0, BUMP), x_high=film(3.0, 20.0), y_low=held(60.0)),
            law=FALLING,
        ),
        VaryingCase(
            UNIT,
            (4.0, 2.0, 1.0),
            FACTORS["falling"],
            held={"y_low": 60.0},
            films={"z_low": FilmData(6.0, bump), "x_high": FilmData(3.0, lambda x, y, z: 20 + 0 * x)},
        ),
        100.0,
    ),
    "pad and generation over a film, table": (
        Body(
            UNIT,
            UNIT,
            all_insulated(z_low=Inflow(SPOT), z_high=film(4.0, 30.0)),
            (BoxSource((0.0, 0.0, 0.0), UNIT, 100.0),),
            law=TABLE,
        ),
        VaryingCase(
            UNIT,
            UNIT,
            FACTORS["table"],
            inflow={"z_low": spot},
            films={"z_high": FilmData(4.0, lambda x, y, z: 30 + 0 * x)},
            generation=100.0,
        ),
        200.0,
    ),
    "glowing pad on a plate of constant conductivity": (
        Body(
            UNIT,
            (60.0, 60.0, 60.0),
            all_insulated(
                z_low=Inflow(FaceMap.patches(UNIT[:2], 0.0, [Patch(Rectangle(1 / 3, 2 / 3, 1 / 3, 0.5), 4e5)])),
                z_high=Film(5.0, FaceMap.uniform(20.0), GLOW),
            ),
        ),
        VaryingCase(
            UNIT,
            (60.0, 60.0, 60.0),
            FACTORS["one"],
            inflow={"z_low": lambda x, y, z: 400 / 1.5 * spot(x, y, z)},
            films={"z_high": FilmData(5.0, lambda x, y, z: 20 + 0 * x, GLOW.coefficient, GLOW.zero)},
        ),
        700.0,
    ),
}
NODES = np.array([(3, 3, 3), (2, 3, 1), (4, 2, 5), (3, 3, 0), (6, 4, 6)]) / 6


@pytest.mark.parametrize("name", ELEMENTS)
def test_field_lies_within_the_error_of_finite_elements(name: str) -> None:
    """The elements converge with the square of the mesh width: the finer mesh is off by a third of the difference."""
    body, case, start = ELEMENTS[name]
    coarse, fine = (solve_varying(case, cells, start)(NODES) for cells in (6, 12))
    own_error, values = float(np.abs(fine - coarse).max()), float(np.ptp(fine))
    assert 0 < own_error < 0.05 * values
    solution = solve(body)
    found = solution.field_at(NODES, tolerance=1e-4 * solution.span).potential
    assert np.abs(found - fine).max() <= own_error
    # A law that were left out would move the field by far more than that.
    assert np.abs(found - (4 * fine - coarse) / 3).max() <= 0.5 * own_error


BOUNDED: dict[str, Body] = {
    "hot patch over a film": Body(
        UNIT,
        (2.0, 2.0, 2.0),
        all_insulated(z_low=Held(pad(1.0, 1.0, 600.0, 20.0)), z_high=film(3.0, 20.0)),
        law=FALLING,
    ),
    "patch of the ambient": Body(
        UNIT, (2.0, 2.0, 2.0), all_insulated(z_low=Film(5.0, pad(1.0, 1.0, 600.0, 20.0)), z_high=held(0.0)), law=TABLE
    ),
    "film beside a held face that differs": Body(
        UNIT, (2.0, 1.0, 2.0), all_insulated(x_low=held(500.0), z_high=film(3.0, 20.0)), law=FALLING
    ),
    "films all around, a pad and a box": Body(
        (1.0, 2.0, 0.7),
        (1.0, 2.0, 0.5),
        {
            "x_low": film(2.0, 30.0),
            "x_high": film(4.0, 20.0),
            "y_low": film(0.5, 30.0),
            "y_high": Insulated(),
            "z_low": Inflow(pad(1.0, 2.0, 900.0)),
            "z_high": film(3.0, 25.0),
        },
        (BoxSource((0.1, 0.2, 0.3), (0.5, 1.0, 0.6), 100.0),),
        law=FALLING,
    ),
    "formula of the surroundings": Body(
        UNIT,
        UNIT,
        all_insulated(
            z_low=Film(5.0, of_formula(UNIT[:2], read("30 + 600*exp(-((x-0.4)/0.2)^2)*sin(pi*y)", ("x", "y")))),
            z_high=held(20.0),
        ),
        law=FALLING,
    ),
    "readings of surroundings that glow": Body(
        (1.0, 1.0, 0.2),
        (15.0, 15.0, 15.0),
        all_insulated(
            z_low=held(300.0),
            z_high=Film(
                50.0,
                FaceMap.readings(
                    UNIT[:2], [0, 0.4, 1], [0, 0.5, 1], [[200, 200, 200], [200, 700, 200], [200, 200, 200]]
                ),
                GLOW,
            ),
        ),
        law=FALLING,
    ),
}


@pytest.mark.parametrize("name", BOUNDED)
def test_no_answer_is_further_off_than_its_bound(name: str) -> None:
    """Against answers ten times more exact."""
    body = BOUNDED[name]
    rough, exact = solve(body), solve(body)
    places = PLACES * np.array(body.size)
    wide, narrow = 1e-2 * rough.span, 1e-3 * rough.span
    found, expected = (
        solution.field_at(places, tolerance=tolerance, with_flux=True)
        for solution, tolerance in ((rough, wide), (exact, narrow))
    )
    assert found.potential_bound <= wide
    assert expected.potential_bound <= narrow
    assert np.abs(found.potential - expected.potential).max() <= found.potential_bound + narrow
    assert found.flux is not None
    assert found.flux_bound is not None
    assert expected.flux is not None
    assert expected.flux_bound is not None
    off = np.nan_to_num(np.abs(found.flux - expected.flux).max(axis=0))
    assert (off <= found.flux_bound + expected.flux_bound).all()
    quarter = Rectangle(0.1, 0.5, 0.2, 0.5)
    for face in body.present_faces:
        for part in (None, quarter if face.startswith("z") else None):
            pair = [solution.face_total(face, part, tolerance=t) for solution, t in ((rough, wide), (exact, narrow))]
            if pair[0].value is not None:
                assert pair[1].value is not None
                assert abs(pair[0].value - pair[1].value) <= pair[0].error_bound + pair[1].error_bound  # type: ignore[operator]
            means = [solution.mean(face, part, tolerance=t) for solution, t in ((rough, wide), (exact, narrow))]
            assert abs(means[0].value - means[1].value) <= means[0].error_bound + means[1].error_bound
    planes = [
        solution.plane_total(2, 0.45 * body.size[2], quarter, tolerance=t)
        for solution, t in ((rough, wide), (exact, narrow))
    ]
    assert abs(planes[0].value - planes[1].value) <= planes[0].error_bound + planes[1].error_bound  # type: ignore[operator]


@pytest.mark.parametrize("name", BOUNDED)
def test_flows_of_all_faces_and_generation_add_up(name: str) -> None:
    solution = solve(BOUNDED[name])
    balance = solution.balance(tolerance=1e-3 * solution.span)
    assert balance.closed


def test_mean_of_a_face_is_that_of_the_potential_and_not_of_theta() -> None:
    """The insulated side of a slab between two temperatures: an integral of a root, by scipy."""
    solution = solve(slab(held(0.0), held(700.0)))
    mean = solution.mean("x_low", tolerance=1e-7)
    expected = quad(lambda z: potential(theta(0.0) + z * (theta(700.0) - theta(0.0))), 0, 1, epsabs=1e-12)[0]
    assert abs(mean.value - expected) <= mean.error_bound <= 1e-6
    assert abs(potential(0.5 * (theta(0.0) + theta(700.0))) - expected) > 1.0


def test_bar_without_a_far_end_loses_through_its_sides_what_flows_in() -> None:
    faces = all_insulated(z_low=Held(pad(1.0, 1.0, 500.0, 30.0)), x_low=film(2.0, 30.0), y_high=film(1.0, 30.0))
    del faces["z_high"]
    solution = solve(Body((1.0, 1.0, math.inf), UNIT, faces, law=FALLING))
    totals = [solution.face_total(face, gap=0.01, tolerance=1e-3 * 470) for face in solution.body.present_faces]
    assert all(total.value is not None for total in totals)
    off = sum(total.error_bound or 0.0 for total in totals)
    assert abs(sum(total.value or 0.0 for total in totals)) <= off


def test_held_value_beyond_the_table_is_named_with_its_face() -> None:
    with pytest.raises(OutsideLaw, match=r"face z_high is held at 900.*from 0 to 800") as refused:
        solve(slab(held(100.0), held(900.0), TABLE))
    assert refused.value.field == ("faces", "z_high")


def test_field_that_leaves_the_table_is_named_with_its_place_and_the_range_needed() -> None:
    """Uniform generation between cold faces: hottest in the middle, at 70 + g / (8 k f) with the last factor 0.75."""
    last = TABLE.factors[-1]
    needed = 70.0 + (0.0 - Kirchhoff(TABLE, 70.0).theta(np.array(800.0)) + 20000 / 16) / last + 730.0
    words = rf"reaches about {needed:.4g}.* at \(.*, 0.5\), on .*ends at 800.*up to {needed:.4g}"
    with pytest.raises(OutsideLaw, match=words):
        solve(slab(held(70.0), held(70.0), TABLE, (BoxSource((0.0, 0.0, 0.0), UNIT, 20000.0),)))


def test_linear_law_that_runs_out_of_conductivity_is_refused() -> None:
    steep = ConductivityLaw.linear(20.0, -2e-3)
    with pytest.raises(OutsideLaw, match="reaches about"):
        solve(slab(held(0.0), inflow(2000.0), steep))


def test_ambient_beyond_the_table_is_allowed_while_the_body_stays_within() -> None:
    solution = solve(slab(film(0.5, 2000.0), held(0.0), TABLE))
    assert solution.extremes(tolerance=0.1).hottest.value < 800.0


@pytest.mark.parametrize(
    ("body", "words"),
    [
        (
            Body(UNIT, UNIT, all_insulated(x_low=inflow(1.0), x_high=inflow(-1.0)), law=FALLING),
            "No face fixes the level",
        ),
        (
            Body((1.0, 1.0, 1.0), UNIT, all_held(), layers=(Layer(0.5, UNIT), Layer(0.5, UNIT)), law=FALLING),
            "stack of layers",
        ),
    ],
    ids=["open level", "layers"],
)
def test_what_a_law_cannot_be_combined_with_is_refused(body: Body, words: str) -> None:
    with pytest.raises(NotPhysical, match=words):
        solve(body)


@pytest.mark.parametrize(
    ("potentials", "factors", "words"),
    [
        ([0.0, 100.0], [1.0], "2 potentials and 1 factors"),
        ([0.0, 0.0], [1.0, 1.0], "have to increase"),
        ([0.0, 100.0], [1.0, 0.0], "factor of the conductivity law is 0"),
        ([0.0, math.nan], [1.0, 1.0], "finite"),
    ],
)
def test_tables_that_are_no_law_are_refused(potentials: list[float], factors: list[float], words: str) -> None:
    with pytest.raises(NotPhysical, match=words):
        ConductivityLaw.table(potentials, factors)


def test_accuracy_that_cannot_be_reached_is_refused_with_one_that_it_can() -> None:
    """Two entries of the table lie between the readings, so that theta of what is held has no exact form."""
    solution = solve(Body(UNIT, UNIT, all_held(20.0, z_low=Held(BUMP)), law=TABLE))
    assert solution.usual_accuracy > 1e-9
    with pytest.raises(AccuracyNotReached) as refused:
        solution.field_at(PLACES, tolerance=1e-9)
    assert refused.value.asked == 1e-9
    found = solution.field_at(PLACES, tolerance=refused.value.bound)
    assert found.potential_bound <= refused.value.bound


def test_iteration_asks_whether_to_go_on_and_an_estimate_counts_its_steps() -> None:
    solution = solve(BOUNDED["hot patch over a film"])
    shape = (5, 5, 5)
    dear = solution.estimate_grid(shape, tolerance=1e-7 * solution.span)
    cheap = solution.estimate_grid(shape, tolerance=1e-1 * solution.span)
    assert dear.multiplications > 2 * cheap.multiplications

    def stop() -> None:
        raise Interrupted("Over.")

    with pytest.raises(Interrupted):
        solution.field_at(PLACES, tolerance=1e-7 * solution.span, keep_going=stop)
    assert solution.field_at(PLACES, tolerance=1e-5 * solution.span).potential_bound <= 1e-5 * solution.span


@pytest.mark.parametrize(
    "law", [ConductivityLaw.linear(20.0, 1e-3), ConductivityLaw.table([0.0, 50.0, 100.0], [1.0, 1.2, 0.7])]
)
def test_extremes_of_held_readings_are_the_readings_under_any_law(law: ConductivityLaw) -> None:
    table = [[20.0, 30.0, 20.0], [30.0, 90.0, 30.0], [20.0, 30.0, 20.0]]
    read = Held(FaceMap.readings((1.0, 1.0), [0.0, 0.5, 1.0], [0.0, 0.5, 1.0], table))
    faces = all_insulated(z_low=read, z_high=held(20.0))
    found = solve(Body((1.0, 1.0, 1.0), (1.0, 1.0, 1.0), faces, law=law)).extremes(tolerance=1e-3)
    assert found.hottest.position == (0.5, 0.5, 0.0)
    assert found.hottest.value == pytest.approx(90.0, abs=1e-9)
    assert found.coldest.value == pytest.approx(20.0, abs=1e-9)
