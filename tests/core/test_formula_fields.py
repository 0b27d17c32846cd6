"""Fields of formula maps against closed forms, and that the error of the map is inside every bound.

One product of eigenfunctions on an end decays along the bar as exp(-gamma z) and keeps its shape (Carslaw and Jaeger
1959, sections 5.2 and 6.2): from a held end with that amplitude, from a film end with h / (h + k gamma) of it, from an
end with a given inflow with 1 / (k gamma) of it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import mpmath
import numpy as np
import pytest

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
    Rectangle,
    formula_map,
    solve,
)
from service.core.errors import AccuracyNotReached
from service.core.formula import read
from service.core.formula_map import of_formula

A, B = 40.0, 60.0
K = (95.0, 60.0, 130.0)
SIDE_FILM, END_FILM = 9.0, 20.0
ZERO = FaceMap.uniform(0.0)
GRID = Grid(
    np.array([0.0, 1e-3, 5.0, 21.0, 33.3, A]),
    np.array([0.0, 7.0, 30.0, 59.0, B]),
    np.array([0.0, 1e-6, 0.01, 1.0, 25.0]),
)


def _of(text: str, extent: tuple[float, float] = (A, B), names: tuple[str, str] = ("x", "y")) -> FaceMap:
    return of_formula(extent, read(text, names))


@dataclass(frozen=True)
class Mode:
    """A product of eigenfunctions: held at x = 0, film at x = A, insulated at y = 0, held at y = B."""

    kind: str

    @property
    def alpha(self) -> float:
        """alpha cot(alpha A) = -h / k: held at one end, film at the other."""
        return float(mpmath.findroot(lambda a: a * mpmath.cos(a * A) + SIDE_FILM / K[0] * mpmath.sin(a * A), 1.8 / A))

    @property
    def beta(self) -> float:
        """Insulated at one end, held at the other: cos."""
        return math.pi / 2 / B

    @property
    def gamma(self) -> float:
        """Decay rate along the bar."""
        return math.sqrt((K[0] * self.alpha**2 + K[1] * self.beta**2) / K[2])

    @property
    def amplitude(self) -> float:
        """What a unit of data becomes on the end."""
        loss = K[2] * self.gamma
        return {"held": 1.0, "film": END_FILM / (END_FILM + loss), "inflow": 1 / loss}[self.kind]

    def body(self) -> Body:
        """The bar driven by that product on its end."""
        data = _of(f"100*sin({self.alpha!r}*x)*cos({self.beta!r}*y)")
        ends: dict[str, Condition] = {"held": Held(data), "film": Film(END_FILM, data), "inflow": Inflow(data)}
        sides: dict[Face, Condition] = {
            "x_low": Held(ZERO), "x_high": Film(SIDE_FILM, ZERO), "y_low": Insulated(), "y_high": Held(ZERO)
        }  # fmt: skip
        return Body((A, B, math.inf), K, {**sides, "z_low": ends[self.kind]})

    def field(self, x: np.ndarray, y: np.ndarray, z: np.ndarray) -> np.ndarray:
        """The closed form."""
        shape = 100 * np.sin(self.alpha * x) * np.cos(self.beta * y)
        return np.asarray(self.amplitude * shape * np.exp(-self.gamma * z))

    def flux(self, x: np.ndarray, y: np.ndarray, z: np.ndarray) -> np.ndarray:
        """Flow per area along each axis."""
        end = 100 * self.amplitude * np.exp(-self.gamma * z)
        along_x = -K[0] * self.alpha * np.cos(self.alpha * x) * np.cos(self.beta * y) * end
        along_y = K[1] * self.beta * np.sin(self.alpha * x) * np.sin(self.beta * y) * end
        return np.array([along_x, along_y, K[2] * self.gamma * self.field(x, y, z)])


MODES = [Mode("held"), Mode("film"), Mode("inflow")]


@pytest.mark.parametrize("goal", [None, 1e-6], ids=["as it is", "coarse map"])
@pytest.mark.parametrize("mode", MODES, ids=lambda mode: mode.kind)
def test_fields_and_fluxes_of_a_formula_are_within_their_bounds(
    mode: Mode, goal: float | None, monkeypatch: pytest.MonkeyPatch
) -> None:
    if goal is not None:
        monkeypatch.setattr(formula_map, "GOAL", goal)
    solution = solve(mode.body())
    map_error = solution._setting.map_error
    tolerance = 1e-9 * solution.span if goal is None else 2.2 * map_error
    found = solution.field(GRID, tolerance=tolerance, with_flux=True)
    places = np.meshgrid(*GRID.axes, indexing="ij")
    off = np.abs(found.potential - mode.field(*places)).max()
    assert off <= found.potential_bound <= tolerance
    assert found.flux is not None
    assert found.flux_bound is not None
    flux_off = np.abs(found.flux - mode.flux(*places)).max(axis=0)
    finite = np.isfinite(flux_off)
    # On the edge with the film and the insulated side the slope of the data is a rounding away from what it has to be.
    assert finite[1:-1, 1:-1].all()
    assert (flux_off <= found.flux_bound)[finite].all()


@pytest.mark.parametrize("goal", [None, 1e-6], ids=["as it is", "coarse map"])
@pytest.mark.parametrize("mode", MODES, ids=lambda mode: mode.kind)
def test_totals_and_means_of_a_formula_are_within_their_bounds(
    mode: Mode, goal: float | None, monkeypatch: pytest.MonkeyPatch
) -> None:
    if goal is not None:
        monkeypatch.setattr(formula_map, "GOAL", goal)
    solution = solve(mode.body())
    tolerance = 1e-9 * solution.span
    along_x, along_y = (1 - math.cos(mode.alpha * A)) / mode.alpha, 1 / mode.beta
    through = 100 * mode.amplitude * K[2] * mode.gamma * along_x * along_y
    checks = [
        (solution.plane_total(2, 20.0, tolerance=tolerance), through * math.exp(-20 * mode.gamma)),
        (solution.face_total("z_low", tolerance=tolerance), through),
        (
            solution.face_total("x_high", tolerance=tolerance),
            -SIDE_FILM * 100 * mode.amplitude * math.sin(mode.alpha * A) * along_y / mode.gamma,
        ),
        (
            solution.plane_total(0, 10.0, Rectangle(5.0, 50.0, 2.0, 30.0), tolerance=tolerance),
            -K[0] * mode.alpha * math.cos(10 * mode.alpha) * 100 * mode.amplitude
            * (math.sin(50 * mode.beta) - math.sin(5 * mode.beta)) / mode.beta
            * (math.exp(-2 * mode.gamma) - math.exp(-30 * mode.gamma)) / mode.gamma,
        ),
    ]  # fmt: skip
    for total, expected in checks:
        assert total.value is not None
        assert total.error_bound is not None
        assert abs(total.value - expected) <= total.error_bound <= (1e-5 if goal is None else 1.0) * abs(through)
    mean = solution.mean("z_low", tolerance=tolerance)
    off = abs(mean.value - 100 * mode.amplitude * along_x * along_y / (A * B))
    assert off <= mean.error_bound
    if goal is not None:
        # Without what is added for the map the bound would be false.
        assert off > mean.error_bound - solution._setting.map_error


def test_an_inflow_that_is_off_everywhere_moves_the_field_by_no_more_than_is_allowed_for() -> None:
    # A block with film sides: off by the same all over is the worst that an error can be.
    given = _of("x*y")
    faces: dict[Face, Condition] = {
        "x_low": Film(2.0, ZERO), "x_high": Film(900.0, ZERO), "y_low": Insulated(), "y_high": Film(5.0, ZERO),
        "z_low": Inflow(given), "z_high": Insulated(),
    }  # fmt: skip
    body, error = Body((A, B, 25.0), K, faces), given.error
    off_all_over = Body(body.size, K, {**body.faces, "z_low": Inflow(FaceMap.uniform(error))})
    rise = solve(off_all_over).extremes(tolerance=1e-6 * error).hottest.value
    assert rise <= solve(body)._setting.map_error <= 1.1 * rise


def test_an_accuracy_below_the_error_of_the_map_is_refused_with_the_one_to_be_had(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(formula_map, "GOAL", 1e-6)
    solution = solve(Mode("held").body())
    points = np.array([[20.0, 30.0, 5.0]])
    with pytest.raises(AccuracyNotReached) as caught:
        solution.field_at(points, tolerance=1e-7)
    assert 1e-7 < caught.value.bound < 1e-3
    assert solution.field_at(points, tolerance=caught.value.bound).potential_bound <= caught.value.bound


def test_extremes_on_a_held_formula_are_those_of_the_formula_itself() -> None:
    data = _of("30 + 600*exp(-((x-20)/8)^2)*sin(pi*y/60)")
    faces: dict[Face, Condition] = dict.fromkeys(FACES, Held(FaceMap.uniform(30.0)))
    found = solve(Body((A, B, 25.0), K, {**faces, "z_low": Held(data)})).extremes(tolerance=1e-7)
    assert found.hottest.value == pytest.approx(630.0, abs=1e-10)
    assert found.hottest.position == pytest.approx((20.0, 30.0, 0.0), abs=1e-4)
    assert found.coldest.value == pytest.approx(30.0, abs=found.coldest.error_bound + 1e-12)


def test_sources_of_a_formula_agree_with_the_series() -> None:
    body = Mode("film").body()
    solution = solve(body)
    points = np.array([[20.0, 30.0, 5.0], [3.0, 3.0, 9.0]])
    found = solution.certificate(points, 1e-6, tolerance=1e-9 * solution.span)
    assert found.checked_places > 0
    assert found.agreement is not None
    assert found.check_bound is not None
    assert found.agreement <= found.check_bound


def test_where_a_formula_is_not_offered_the_body_is_refused() -> None:
    insulated: dict[Face, Condition] = dict.fromkeys(FACES, Insulated())
    with pytest.raises(NotPhysical, match="inflows have to balance exactly then"):
        Body((A, B, 25.0), K, {**insulated, "z_low": Inflow(_of("cos(pi*x/40)"))})


def test_formula_on_the_top_of_a_stack_of_one_material_is_that_on_the_block() -> None:
    cold: dict[Face, Condition] = dict.fromkeys(FACES, Held(ZERO))
    faces: dict[Face, Condition] = {**cold, "z_low": Insulated(), "z_high": Held(_of("x*(40-x)*sin(pi*y/60)"))}
    block, stack = Body((A, B, 10.0), K, faces), Body.stack((A, B), [Layer(4.0, K), Layer(6.0, K)], faces)
    points = np.array([[11.0, 30.0, 3.0], [20.0, 7.0, 9.9], [39.0, 59.0, 10.0]])
    one, other = (solve(body).field_at(points, tolerance=1e-7) for body in (block, stack))
    np.testing.assert_allclose(one.potential, other.potential, rtol=0, atol=one.potential_bound + other.potential_bound)


def test_flux_a_billionth_of_a_side_from_an_edge_where_rounding_makes_a_jump() -> None:
    # sin(alpha 40) is a film's condition, cos(beta 60) is zero but for a rounding: there the held side meets the data.
    mode = Mode("held")
    places = np.array([[21.0, B, 1e-9 * A], [21.0, B, 1e-7 * A], [0.0, 30.0, 1e-9 * A], [0.0, B, 3e-9 * A]])
    solution = solve(mode.body())
    found = solution.field_at(places, tolerance=1e-9 * solution.span, with_flux=True)
    assert found.flux is not None
    assert found.flux_bound is not None
    assert (np.abs(found.flux - mode.flux(*places.T)).max(axis=0) <= found.flux_bound).all()
