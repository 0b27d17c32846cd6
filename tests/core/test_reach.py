"""How far a face reaches, against closed forms of single modes, full series, slabs and a half-space."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from scipy.integrate import dblquad
from scipy.optimize import brentq

from service.core import (
    FACES,
    Body,
    Condition,
    Face,
    FaceMap,
    Film,
    Grid,
    Held,
    Inflow,
    Insulated,
    Layer,
    NotPhysical,
    Patch,
    Reached,
    Rectangle,
    solve,
)
from service.core.formula import read
from service.core.formula_map import of_formula

ZERO, ONE = FaceMap.uniform(0.0), FaceMap.uniform(1.0)
FRACTIONS = (0.5, 0.1, 0.01)


def bar(end: Condition, side: Condition, *, length: float = math.inf) -> Body:
    """A square bar of side 1 that conducts alike everywhere."""
    sides: dict[Face, Condition] = {"x_low": side, "x_high": side, "y_low": side, "y_high": side, "z_low": end}
    if math.isfinite(length):
        sides["z_high"] = Insulated()
    return Body((1.0, 1.0, length), (1.0, 1.0, 1.0), sides)


def within(found: Reached, expected: float) -> bool:
    """Whether a distance is what is expected, to its bound, and that bound is worth having."""
    assert found.distance is not None
    assert found.error_bound is not None
    assert found.error_bound < 1e-5 * expected
    return abs(found.distance - expected) <= found.error_bound


def test_square_bar_held_at_one_value_against_its_double_series() -> None:
    # (16 / pi^2) sum over odd m, n of (-1)^((m + n) / 2 - 1) / (m n) exp(-pi sqrt(m^2 + n^2) z) in the middle.
    odd = np.arange(1, 80, 2)
    signs = (-1.0) ** (odd // 2) / odd
    rates = math.pi * np.hypot(odd[:, None], odd)

    def middle(z: float) -> float:
        return float(16 / math.pi**2 * (np.outer(signs, signs) * np.exp(-rates * z)).sum())

    found = solve(bar(Held(ONE), Held(ZERO))).reach("z_low", FRACTIONS, tolerance=1e-9)
    assert (found.largest, found.largest_bound) == (1.0, 0.0)
    for fraction, worst, on_axis in zip(FRACTIONS, found.worst, found.on_axis, strict=True):
        expected = brentq(lambda z, fraction=fraction: middle(z) - fraction, 0.1, 2.0, xtol=1e-14)
        assert within(worst, expected)
        assert within(on_axis, expected)
        assert worst.at == pytest.approx((0.5, 0.5, expected), abs=1e-4)


def test_decay_rates_of_a_square_bar_are_those_of_its_sines() -> None:
    # gamma_mn = pi sqrt(m^2 + n^2) / a: over one width the slowest falls to exp(-pi sqrt 2) = 1.2 %.
    found = solve(bar(Held(ONE), Held(ZERO))).reach("z_low", [0.5], modes=6, tolerance=1e-6)
    expected = sorted((math.pi * math.hypot(m, n), m, n) for m in range(1, 7) for n in range(1, 7))[:6]
    assert [mode.rate for mode in found.rates] == pytest.approx([rate for rate, _, _ in expected], rel=1e-14)
    assert {mode.numbers for mode in found.rates} == {(m, n) for _, m, n in expected}
    assert found.rates[0].length == pytest.approx(1 / (math.pi * math.sqrt(2)))
    assert math.exp(-found.rates[0].rate) == pytest.approx(0.0118, abs=5e-5)


def test_decay_rate_beside_films_and_across_grain() -> None:
    # beta tan beta = Bi / 2 for half of a line with the same film on both sides
    sides: dict[Face, Condition] = {"x_low": Film(6.0, ZERO), "x_high": Film(6.0, ZERO), "y_low": Insulated()}
    body = Body((2.0, 5.0, math.inf), (3.0, 7.0, 11.0), {**sides, "y_high": Held(ZERO), "z_low": Held(ONE)})
    beta = float(mpmath.findroot(lambda b: b * mpmath.tan(b) - 6.0 * 1.0 / 3.0, 1.1))
    expected = math.sqrt((3.0 * beta**2 + 7.0 * (math.pi / 10) ** 2) / 11.0)
    assert solve(body).reach("z_low", [0.5], tolerance=1e-6).rates[0].rate == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("kind", ["held", "film", "inflow"])
def test_a_single_mode_reaches_as_far_as_its_logarithm(kind: str) -> None:
    given = of_formula((1.0, 1.0), read("-70*sin(pi*x)*sin(2*pi*y)", ("x", "y")))
    ends: dict[str, Condition] = {"held": Held(given), "film": Film(3.0, given), "inflow": Inflow(given)}
    gamma = math.pi * math.sqrt(5)
    found = solve(bar(ends[kind], Held(ZERO))).reach("z_low", FRACTIONS, tolerance=1e-9)
    size = {"held": 1.0, "film": 3 / (3 + gamma), "inflow": 1 / gamma}[kind]
    assert abs(found.largest - 70 * size) <= found.largest_bound + 1e-12
    for fraction, worst, on_axis in zip(FRACTIONS, found.worst, found.on_axis, strict=True):
        assert within(worst, -math.log(fraction) / gamma)
        # The middle lies on a line where this mode is zero.
        assert (on_axis.distance, on_axis.error_bound) == (0.0, 0.0)


def test_a_slab_falls_in_a_straight_line_to_what_the_far_film_leaves() -> None:
    faces: dict[Face, Condition] = dict.fromkeys(FACES, Insulated())
    body = Body((4.0, 6.0, 10.0), (1.0, 2.0, 0.5), {**faces, "z_low": Held(ONE), "z_high": Film(0.1, ZERO)})
    found = solve(body).reach("z_low", [0.75, 0.1], tolerance=1e-9)
    # u = 1 - z / (c + k / h)
    assert within(found.worst[0], 0.25 * 15.0)
    assert found.worst[1].distance is None
    assert found.worst[1].left == pytest.approx(1 / 3, abs=1e-8)
    assert found.worst[1].at is None
    assert (found.rates[0].rate, found.rates[0].length) == (0.0, None)


def test_between_insulated_sides_the_mean_stays() -> None:
    half = FaceMap.patches((1.0, 1.0), 0.0, [Patch(Rectangle(0.0, 0.5, 0.0, 0.5), 1.0)])
    found = solve(bar(Held(half), Insulated())).reach("z_low", [0.5, 0.2], tolerance=1e-9)
    assert found.worst[0].distance is not None
    assert found.worst[1].distance is None
    assert found.worst[1].left == pytest.approx(0.25, abs=1e-8)


def test_the_far_end_of_a_block_reaches_as_far_as_the_near_one() -> None:
    spot = FaceMap.patches((1.0, 1.0), 5.0, [Patch(Rectangle(0.1, 0.3, 0.6, 0.9), -40.0)])
    cold: dict[Face, Condition] = dict.fromkeys(FACES, Held(FaceMap.uniform(5.0)))
    low, high = (
        solve(Body((1.0, 1.0, 3.0), (1.0, 1.0, 1.0), {**cold, face: Held(spot)})).reach(face, FRACTIONS, tolerance=1e-9)
        for face in ("z_low", "z_high")
    )
    assert (low.reference, low.largest) == (5.0, 45.0)
    for near, far in zip(low.worst, high.worst, strict=True):
        assert near.distance is not None
        assert near.error_bound is not None
        assert within(far, near.distance) or abs((far.distance or 0.0) - near.distance) <= 2 * near.error_bound
        assert far.at is not None
        assert far.at[2] == pytest.approx(3.0 - near.distance)


def test_distances_are_where_the_field_passes_the_fraction() -> None:
    """Two spots of either sign: the worst place is first behind the stronger one and wanders."""
    spots = [Patch(Rectangle(0.05, 0.15, 0.8, 0.9), 1.0), Patch(Rectangle(0.6, 0.8, 0.1, 0.3), -2.0)]
    body = bar(Held(FaceMap.patches((1.0, 1.0), 0.0, spots)), Held(ZERO))
    solution = solve(body)
    found = solution.reach("z_low", FRACTIONS, tolerance=1e-9)
    line = np.linspace(0.0, 1.0, 41)
    for reached in found.worst:
        assert reached.distance is not None
        assert reached.error_bound is not None
        assert reached.at is not None
        wanted = reached.fraction * found.largest
        before, beyond = reached.distance - 1e-4, reached.distance + 1e-4
        at = np.array([[*reached.at[:2], before]])
        assert abs(solution.field_at(at, tolerance=1e-9).potential[0]) > wanted
        section = np.stack([*(grid.ravel() for grid in np.meshgrid(line, line)), np.full(line.size**2, beyond)], axis=1)
        assert np.abs(solution.field_at(section, tolerance=1e-9).potential).max() < wanted


def test_sources_and_other_faces_have_no_part_in_it() -> None:
    quiet, loud = bar(Held(ONE), Held(ZERO)), bar(Held(FaceMap.uniform(21.0)), Held(FaceMap.uniform(20.0)))
    loud.faces["x_high"] = Held(of_formula((1.0, math.inf), read("20+y", ("y", "z"))))  # type: ignore[index]
    one, other = (solve(body).reach("z_low", [0.1], tolerance=1e-9).worst[0].distance for body in (quiet, loud))
    assert one == pytest.approx(other, abs=1e-7)


def test_a_uniform_change_of_an_insulated_side() -> None:
    # One unit of inflow into a slab that is held opposite: a straight line.
    faces: dict[Face, Condition] = dict.fromkeys(FACES, Insulated())
    body = Body((4.0, 6.0, 10.0), (2.0, 1.0, 0.5), {**faces, "x_high": Held(FaceMap.uniform(7.0))})
    found = solve(body).reach("x_low", [0.5], unit=True, tolerance=1e-9)
    assert abs(found.largest - 4.0 / 2.0) <= found.largest_bound + 1e-12
    assert within(found.worst[0], 2.0)


def test_a_square_pad_on_a_half_space() -> None:
    everywhere = (-math.inf, -math.inf)
    pad = FaceMap.patches((math.inf, math.inf), 0.0, [Patch(Rectangle(-1.0, 1.0, -1.0, 1.0), 1.0)], begins=everywhere)
    body = Body((math.inf,) * 3, (1.0, 1.0, 1.0), {"z_low": Inflow(pad)}, infinite=(True, True, False))
    found = solve(body).reach("z_low", [0.5, 0.1], tolerance=1e-9)

    def below(z: float) -> float:
        quarter, _ = dblquad(lambda y, x: 1 / math.sqrt(x * x + y * y + z * z), 0, 1, 0, 1, epsabs=1e-13)
        return 4 * quarter / (2 * math.pi)

    largest = 4 * math.asinh(1.0) / math.pi  # 2 q b ln(1 + sqrt 2) 2 / (pi k) for a half side b
    assert abs(found.largest - largest) <= found.largest_bound + 1e-12
    for reached in (*found.worst, *found.on_axis):
        expected = brentq(lambda z, part=reached.fraction: below(z) - part * largest, 0.1, 20.0, xtol=1e-12)
        assert within(reached, expected)
    assert found.rates == ()


def test_a_fraction_passed_in_the_step_of_a_contact_is_at_that_contact() -> None:
    layers = [Layer(0.1, (1.0, 1.0, 1.0)), Layer(0.2, (10.0, 10.0, 5.0), contact_below=3.0)]
    cold: dict[Face, Condition] = dict.fromkeys(FACES, Held(ZERO))
    stack = Body.stack((1.0, 1.0), layers, {**cold, "z_low": Held(ONE), "z_high": Film(2.0, ZERO)})
    found = solve(stack).reach("z_low", [0.5, 0.01], tolerance=1e-9)
    assert (found.worst[0].distance, found.worst[0].error_bound) == (0.1, 0.0)
    assert found.worst[1].distance is None


def test_the_side_of_a_long_bar_reaches_as_far_as_that_of_a_plate() -> None:
    # Far along the bar the field is that of a plate between two held faces: a straight line.
    sides: dict[Face, Condition] = {
        "x_low": Held(ONE),
        "x_high": Held(ZERO),
        "y_low": Insulated(),
        "y_high": Insulated(),
    }
    found = solve(Body((3.0, 1.0, math.inf), (1.0, 1.0, 1.0), {**sides, "z_low": Held(ZERO)})).reach(
        "x_low", [0.5, 0.25], tolerance=1e-9
    )
    for reached in found.worst:
        assert within(reached, 3.0 * (1 - reached.fraction))
    assert found.on_axis == ()


@pytest.mark.parametrize(
    ("body", "face", "sentence"),
    [
        (bar(Held(ONE), Held(ONE)), "z_low", "disturbs nothing: its data are at the level of the others"),
        (bar(Insulated(), Held(ONE)), "z_low", "disturbs nothing"),
        (
            Body(
                (1.0, 1.0, 1.0),
                (1.0, 1.0, 1.0),
                {**dict.fromkeys(FACES, Insulated()), "z_low": Inflow(ONE), "z_high": Inflow(FaceMap.uniform(-1.0))},
            ),
            "z_low",
            "so it alone has no steady field",
        ),
    ],
)
def test_a_face_without_a_disturbance_of_its_own_is_refused(body: Body, face: Face, sentence: str) -> None:
    with pytest.raises(NotPhysical, match=sentence):
        solve(body).reach(face, [0.5], tolerance=1e-9)


def test_worst_place_on_a_section_that_is_flat_to_less_than_the_first_look_is_found() -> None:
    """Far along a bar that hardly loses anything the size falls by 1e-5 across it, and 1e-7 is a unit of distance."""
    size = (464.0, 167.0, math.inf)
    patch = FaceMap.patches(size[:2], 0.0, [Patch(Rectangle(294.7, 358.0, 36.8, 124.3), 1.0)])
    faces: dict[Face, Condition] = {"x_high": Insulated(), "y_low": Insulated(), "y_high": Insulated()}
    faces |= {"x_low": Film(5.77e-8, FaceMap.uniform(0.0)), "z_low": Held(patch)}
    body = Body(size, (0.1273, 0.6815, 1.039), faces)
    solution = solve(body)
    (found,) = solution.reach("z_low", [0.01], tolerance=1e-6).worst
    assert found.distance is not None
    assert found.error_bound is not None
    beyond = found.distance + found.error_bound
    section = solution.field(
        Grid(np.linspace(0.0, 464.0, 9), np.linspace(0.0, 167.0, 5), np.array([beyond])), tolerance=1e-9
    )
    assert section.potential.max() <= 0.01 + section.potential_bound
