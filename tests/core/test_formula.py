"""Formulas: what is read and what is refused, enclosures of derivatives, and maps whose error is certified."""

from __future__ import annotations

import math
from collections.abc import Callable

import mpmath
import numpy as np
import pytest

from service.core import FaceMap, NotPhysical, formula_map
from service.core.formula import FUNCTIONS, Formula, read
from service.core.formula_map import of_formula
from service.core.jets import Jet

X, Y = np.array([0.3, 1.7, 2.9]), np.array([0.2, 3.4])
EXTENT = (40.0, 60.0)

# What each means is written again in the language of the test.
MEANINGS: dict[str, Callable[[float, float], float]] = {
    "6*exp(-((x-2)/8)^2)*sin(pi*y/6)": lambda x, y: 6 * math.exp(-(((x - 2) / 8) ** 2)) * math.sin(math.pi * y / 6),
    "-x^2": lambda x, y: -(x**2),
    "2^3^2": lambda x, y: 512.0,
    "2**-1 * y": lambda x, y: 0.5 * y,
    "x - y - 1": lambda x, y: (x - y) - 1,
    "x / y / 2": lambda x, y: (x / y) / 2,
    "+x*(y+e)^1.5": lambda x, y: x * (y + math.e) ** 1.5,
    "max(x, y, 1) - min(x, y)": lambda x, y: max(x, y, 1) - min(x, y),
    "ln(x) + log(y) + log10(x*y)": lambda x, y: math.log(x) + math.log(y) + math.log10(x * y),
    "sqrt(x)^y": lambda x, y: math.sqrt(x) ** y,
    "atan(x) + asin(x/3) + acos(y/4)": lambda x, y: math.atan(x) + math.asin(x / 3) + math.acos(y / 4),
    "tan(x/2) + tanh(y) + sinh(x) - cosh(y)": lambda x, y: math.tan(x / 2) + math.tanh(y) + math.sinh(x) - math.cosh(y),
    "  abs( x - 2 )": lambda x, y: abs(x - 2),
    "1e-3*x + .5": lambda x, y: 1e-3 * x + 0.5,
}  # fmt: skip

REFUSED = {
    "20 + u": "The name u at character 6 of the expression is not known; the coordinates are x and y",
    "2^2^z": "The face has no extent along z, at character 5 of the expression",
    "x + 1_000": "The number at character 5 of the expression is not written in decimal",
    "0x10*x": "The number at character 1 of the expression is not written in decimal",
    "(x^2 +\n0b1)": "of the expression is not written in decimal",
    "20 + sin": "The function sin at character 6 of the expression needs its argument in parentheses",
    "min(x)": "The function min at character 1 of the expression needs at least two arguments",
    "3*hypot(x, y)": "The function hypot at character 3 of the expression is not known; there are sin, cos",
    "exp(x, 2)": "takes one argument, not 2",
    "exp(base=x)": "Character 1 of the expression begins something that has no place in a formula",
    "x if y else 2": "has no place in a formula",
    "x < 20": "has no place in a formula",
    "[x]": "has no place in a formula",
    "'x'": "has no place in a formula",
    "x % 2": "has no place in a formula",
    "True + x": "has no place in a formula",
    "(lambda: x)()": "has no place in a formula",
    "x.real": "has no place in a formula",
    "x[0]": "has no place in a formula",
    "x = 2": "cannot be read near character 3",
    "2*(x": "cannot be read near character",
    "x + ": "cannot be read",
    "": "cannot be read",
    "x^65": "The exponent at character 3 of the expression is 65; it has to lie between -64 and 64",
    "x + 1e999": "The number at character 5 of the expression is too large",
    "x + " + "9" * 400: "The number at character 5 of the expression is too large",
    "20 \N{MULTIPLICATION SIGN} x": "Character 4 of the expression is none that is used in a formula",
    "+".join("x" * 300): "at most 500 are read",
    "+".join("x" * 150): "more than 200 parts",
    "-" * 50 + "x": "levels of nesting",
    "(" * 240 + "x" + ")" * 240: "cannot be read",
}


def formula(text: str) -> Formula:
    return read(text, ("x", "y"))


@pytest.mark.parametrize("text", MEANINGS)
def test_an_expression_means_what_it_means_in_mathematics(text: str) -> None:
    expected = [[MEANINGS[text](x, y) for y in Y] for x in X]
    np.testing.assert_allclose(formula(text).at(X, Y), expected, rtol=1e-14)


@pytest.mark.parametrize("text", REFUSED)
def test_anything_else_is_refused_in_one_sentence_that_says_where(text: str) -> None:
    with pytest.raises(NotPhysical) as caught:
        formula(text)
    assert REFUSED[text] in caught.value.message
    assert caught.value.message.endswith(".")


# Each function of one argument at an argument of its domain, and ways they combine.
DIFFERENTIATED = [
    *(f"{name}(0.3 + 0.2*sin(x*y))" for name in FUNCTIONS),
    "x^3/(1+y*x)",
    "(1+x)^-2.5",
    "(x*y)^5 - 3*x^4",
    "2^(x*y)",
    "min(x, 5)*max(y+9, x)",
    "abs(x-9)*exp(-x^2)",
]


@pytest.mark.parametrize("text", DIFFERENTIATED)
def test_derivatives_everywhere_in_a_box_lie_in_their_enclosure(text: str) -> None:
    own, order = formula(text), 8
    low, high = np.array([0.4, 1.1]), np.array([0.52, 1.1 + 1e-3])
    jet = own.root.of_jets(
        {"x": Jet.box(low, high, order, varies=True), "y": Jet.box(low, high, order, varies=False)}, order
    )
    with mpmath.workdps(40):
        for box in range(2):
            for share_x, share_y in ((0.0, 0.0), (0.37, 0.81), (1.0, 0.5), (0.5, 1.0)):
                x = mpmath.mpf(low[box]) + share_x * (mpmath.mpf(high[box]) - low[box])
                y = mpmath.mpf(low[box]) + share_y * (mpmath.mpf(high[box]) - low[box])
                exact = mpmath.taylor(lambda s, y=y: _exactly(text, s, y), x, order)
                for k, coefficient in enumerate(exact):
                    room = 1e-13 * max(1.0, abs(float(coefficient)))
                    found = jet[k]
                    assert _in_box(found.low, box) - room <= coefficient <= _in_box(found.high, box) + room, (k, text)


def test_enclosures_of_small_boxes_are_narrow() -> None:
    own, low = formula("exp(-((x-20)/8)^2)*sin(pi*y/60)"), np.array([17.0])
    jet = own.root.of_jets(
        {"x": Jet.box(low, low + 1e-3, 8, varies=True), "y": Jet.box(low, low + 1e-3, 8, varies=False)}, 8
    )
    for k in range(9):
        assert jet[k].high - jet[k].low < 0.05 * jet[k].size


def _in_box(values: np.ndarray, box: int) -> float:
    return float(np.broadcast_to(values, 2)[box])


def _exactly(text: str, x: mpmath.mpf, y: mpmath.mpf) -> mpmath.mpf:
    """The value in many digits, by the multiple-precision functions of the same names."""
    names = {name: getattr(mpmath, name, None) for name in FUNCTIONS} | {"min": min, "max": max, "abs": abs}
    names |= {"x": x, "y": y, "pi": mpmath.pi, "e": mpmath.e}
    return eval(text.replace("^", "**"), {"__builtins__": {}}, names)


SMOOTH = [
    "30 + 600*exp(-((x-20)/8)^2)*sin(pi*y/60)",
    "cos(x*y/300)",
    "1e4 + 1/(1+25*((x-20)/20)^2)",
    "abs(x-13.37)*sin(y/10) + max(y, 20.5)",
    "tanh((x-20)/3) + exp(-y)",
    "600*exp(-((x-20)^2+(y-30)^2)/50)",
    "sqrt(x+0.5)",
    "x^2 - 3*x*y",
]


@pytest.mark.parametrize("text", SMOOTH)
def test_map_of_a_formula_is_nowhere_further_off_than_its_error(text: str) -> None:
    face_map, own = of_formula(EXTENT, formula(text)), formula(text)
    rng = np.random.default_rng(5)
    p, q = np.sort(rng.uniform(0, 40, 400)), np.sort(rng.uniform(0, 60, 400))
    exact = own.at(p, q)
    off = float(np.abs(face_map.at(p, q) - exact).max())
    span = float(exact.max() - exact.min())
    assert off <= face_map.error
    # Good enough for the default accuracy of a billionth, and no more pieces than that needs.
    assert face_map.error <= 2e-10 * max(span, float(np.abs(exact).max()) * 1e-4)
    assert max(face_map.first_knots.size, face_map.second_knots.size) <= formula_map.MOST_PIECES + 1


@pytest.mark.parametrize("text", SMOOTH)
def test_coarse_maps_show_that_the_error_is_near_what_is_stated(text: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formula_map, "GOAL", 1e-5)
    face_map, own = of_formula(EXTENT, formula(text)), formula(text)
    p, q = np.linspace(0, 40, 901), np.linspace(0, 60, 901)
    off = np.abs(face_map.at(p, q) - own.at(p, q)).max()
    assert off <= face_map.error <= max(1.1e-5 * float(np.ptp(own.at(p, q))), 1e-13 * face_map.highest)


def test_kinks_along_an_axis_get_a_knot_to_the_last_digit() -> None:
    face_map = of_formula(EXTENT, formula("abs(x-13.37) + min(y^2, 500) + abs(sin(pi*x/20))"))
    assert face_map.kinks[0] == pytest.approx((13.37, 20.0), rel=3e-16)
    assert face_map.kinks[1] == pytest.approx((math.sqrt(500),), rel=3e-16)


def test_slopes_of_map_and_formula_differ_by_no_more_than_stated(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formula_map, "GOAL", 1e-6)
    face_map = of_formula(EXTENT, formula("600*exp(-((x-20)/8)^2)"))
    x = np.linspace(0, 40, 4001)
    exact = 600 * np.exp(-(((x - 20) / 8) ** 2)) * -2 * (x - 20) / 64
    off = np.abs(face_map.first.slope_at(x) @ face_map.second.at(np.zeros(1)).T - exact[:, None]).max()
    assert 0 < off <= face_map.slope_error < 2000 * off


@pytest.mark.parametrize(
    ("text", "sign", "value", "place"),
    [
        ("30 + 600*exp(-((x-20)/8)^2)*sin(pi*y/60)", 1, 630.0, (20.0, 30.0)),
        ("(x-7.123)^2 + (y-33.3)^2", -1, 0.0, (7.123, 33.3)),
        # the ends of the face and a kink
        ("x + y", 1, 100.0, (40.0, 60.0)),
        ("abs(x-13.37) + y", -1, 0.0, (13.37, 0.0)),
    ],
)
def test_highest_and_lowest_value_are_found(text: str, sign: int, value: float, place: tuple[float, float]) -> None:
    face_map = of_formula(EXTENT, formula(text))
    assert face_map.peaks is not None
    peak = face_map.peaks[1 if sign > 0 else 0]
    assert peak.value == pytest.approx(value, abs=peak.slack + 1e-12)
    assert (peak.first, peak.second) == pytest.approx(place, abs=1e-4)
    assert peak.slack < 1e-9


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("20/x", "no finite value at x = 0, y = 0"),
        ("ln(y-5)", "no finite value at x = 0, y = 0"),
        ("sqrt(x-1)", "no finite value at x = 0"),
        ("exp(x^3)", "no finite value at x = "),
        ("1/(x-20.123)", r"jumps, turns too sharply or is not finite near x = 20\.07"),
        ("atan(1e9*(x-3))", "jumps, turns too sharply or is not finite near x = "),
        ("abs(x-y)", "kinks may only run along an axis"),
        ("2+sqrt(x)", "slope of sqrt at character 3 .* comes to 0, as it does near x = 0.0006"),
        ("abs(x-20)^0.5", "slope of the power at character 11 .* comes to 0, as it does near x = "),
        ("sqrt(y)*exp(-x)", "slope of sqrt at character 1 .* comes to 0, as it does near x = .*, y = 0.00"),
        ("asin(x/40)", "slope of asin at character 1 .* comes to 1, as it does near x = 39.99"),
        ("sqrt(x+1)+atan(1e9*(x-3))", "jumps, turns too sharply"),
    ],
)
def test_what_no_map_can_show_is_refused(text: str, sentence: str) -> None:
    with pytest.raises(NotPhysical, match=sentence):
        of_formula(EXTENT, formula(text))


def test_formula_of_one_coordinate_and_of_none() -> None:
    along = of_formula((40.0, math.inf), formula("2 + x"))
    assert along.at(np.array([3.0]), np.array([0.0, 1e6])) == pytest.approx(np.array([[5.0, 5.0]]))
    assert of_formula((40.0, math.inf), formula("2 + 3*pi")).is_uniform
    with pytest.raises(NotPhysical, match="varies along y, where the face has no end"):
        of_formula((40.0, math.inf), formula("2 + y"))


def test_counted_from_another_zero_it_is_the_same_map() -> None:
    face_map = of_formula(EXTENT, formula("20 + x*y"))
    assert isinstance(face_map, FaceMap)
    moved = face_map.minus(20.0)
    assert moved.at(np.array([2.0]), np.array([3.0]))[0, 0] == pytest.approx(6.0, abs=1e-11)
    assert (moved.lowest, moved.highest) == (0.0, 2400.0)
