"""How each published number is got from the solver core.

Each measure takes a quantity and gives the number the core makes of it. Limits (half-space, point contacts,
vanishing pads) are approached by finite bodies; each says what the limit costs.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from service.core import AccuracyNotReached, Rectangle, Solution, solve
from service.core.lines.eigenvalues import roots
from tests.core.reference.cases import Case, Cells, Wall, walls
from tests.core.reference.published import Quantity

# Of the span of the data: a tenth of the 1e-9 to which ten-digit values are checked.
ACCURACY = 1e-10


def solution_of(quantity: Quantity) -> Solution:
    """The core's solution, one for all quantities of the same body."""
    assert quantity.case is not None
    return solve(quantity.case.body())


def value_at(solution: Solution, place: tuple[float, float, float], accuracy: float = ACCURACY) -> float:
    """Potential at one place."""
    field = solution.field_at(np.array([place]), tolerance=accuracy * solution.span, with_flux=False)
    return float(field.potential[0])


def _potential(quantity: Quantity) -> float:
    return value_at(solution_of(quantity), quantity.details["at"])


def _difference(quantity: Quantity) -> float:
    solution = solution_of(quantity)
    first, second = quantity.details["at"]
    return value_at(solution, first) - value_at(solution, second)


def _decay(quantity: Quantity) -> float:
    """Decay of the potential over one width, from values as accurate as the core promises any.

    At 4.5 widths the next mode is down by exp(-(pi sqrt 10 - pi sqrt 2) 4.5) = 2e-11; 4e-11 is left at 5.5.
    """
    solution = solution_of(quantity)
    near, far = (_finest_value_at(solution, place) for place in quantity.details["at"])
    return math.log(near / far)


def _finest_value_at(solution: Solution, place: tuple[float, float, float]) -> float:
    """Potential at one place to the tightest bound that the core offers when asked for too much."""
    try:
        return value_at(solution, place, 1e-25)
    except AccuracyNotReached as refused:
        return value_at(solution, place, 1.01 * refused.bound / solution.span)


def _flux(quantity: Quantity) -> float:
    solution = solution_of(quantity)
    places = np.array([quantity.details["at"]])
    field = solution.field_at(places, tolerance=ACCURACY * solution.span, with_flux=True)
    assert field.flux is not None
    return float(field.flux[quantity.details["axis"], 0])


def _mean(quantity: Quantity) -> float:
    solution = solution_of(quantity)
    rectangle = quantity.details.get("rectangle")
    return solution.mean(
        quantity.details["face"],
        None if rectangle is None else Rectangle(*rectangle),
        tolerance=ACCURACY * solution.span,
    ).value


def _face_outflow(quantity: Quantity) -> float:
    solution = solution_of(quantity)
    total = solution.face_total(quantity.details["face"], tolerance=ACCURACY * solution.span)
    assert total.value is not None
    return -total.value


def _plane_flow(solution: Solution, axis: int, position: float) -> float:
    total = solution.plane_total(axis, position, tolerance=ACCURACY * solution.span)
    assert total.value is not None
    return total.value


def _plane_total(quantity: Quantity) -> float:
    return _plane_flow(solution_of(quantity), quantity.details["axis"], quantity.details["position"])


def _finite_part(quantity: Quantity) -> float:
    """Flow through z = 1e-10 less its logarithm; what is left out is of the order of the distance."""
    distance = 1e-10
    growth: float = quantity.details["coefficient"] / math.pi
    return _plane_flow(solution_of(quantity), 2, distance) - growth * math.log(1 / distance)


def _edge_coefficient(quantity: Quantity) -> float:
    """Growth of the total per factor e of the gap, for the first of four unit edges and a unit jump."""
    solution = solution_of(quantity)
    total = solution.face_total(quantity.details["face"], tolerance=ACCURACY * solution.span)
    assert total.value is None
    assert len(total.causes) == 4
    return total.causes[0].coefficient


def _overshoot(quantity: Quantity) -> float:
    """First overshoot of the sine series of a unit step, the end of a strip, with 4000 terms."""
    strip = Case((1.0, 1.0, math.inf), (1.0, 1.0, 1.0), walls(x_low="D", x_high="D", z_low=Wall("D", 1.0)))
    (found,) = solve(strip.body()).overshoot(4000)
    return 1.0 + found.overshoot


def _root(quantity: Quantity) -> float:
    low, high = (math.inf if biot == "held" else float(biot) for biot in quantity.details["biot"])
    index: int = quantity.details["index"]
    return float(roots(low, high, index)[index - 1])


def _amplitude(quantity: Quantity) -> float:
    """C_1 = 4 sin zeta / (2 zeta + sin 2 zeta), the first term of a wall that starts at one."""
    zeta = _root(quantity)
    return 4 * math.sin(zeta) / (2 * zeta + math.sin(2 * zeta))


def _corner_resistance(long: float, across: float) -> float:
    """Voltage over the opposite corners per unit current through strips at two corners of a sheet.

    Strips of width w in place of points cost about w^2 / 3, here 3e-13 for strips of a millionth; a binary
    fraction keeps both strips equal to the last digit, so that the currents cancel.
    """
    w = 2.0**-20
    contacts = Cells(0.0, ((0.0, w, 0.0, 1.0, 1 / w), (long - w, long, 0.0, 1.0, -1 / w)))
    case = Case((long, across, 1.0), (1.0, 1.0, 1.0), walls(y_low=Wall("N", contacts)))
    solution = solve(case.body())
    return value_at(solution, (0.0, across, 0.5)) - value_at(solution, (long, across, 0.5))


def _corner_contacts(quantity: Quantity) -> float:
    return _corner_resistance(*quantity.details["sides"])


def _corner_relation(quantity: Quantity) -> float:
    long, short = quantity.details["sides"]
    return math.exp(-math.pi * _corner_resistance(long, short)) + math.exp(-math.pi * _corner_resistance(short, long))


def _pad_on_cube(side: float, length: float, width: float) -> tuple[Solution, tuple[float, float, float, float]]:
    middle = side / 2
    where = (middle - length / 2, middle + length / 2, middle - width / 2, middle + width / 2)
    cold = dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_high"), Wall("D"))
    pad = Wall("N", Cells(0.0, ((*where, 1.0),)))
    case = Case((side, side, side), (1.0, 1.0, 1.0), walls(**cold, z_low=pad))
    return solve(case.body()), where


def _half_space_limit(read: Callable[[float], float]) -> float:
    """Limit for a cube that grows: u + c1 / side + c3 / side^3 + O(side^-5), here about 1e-12."""
    values = [read(side) for side in (128.0, 256.0, 512.0)]
    first = [2 * values[1] - values[0], 2 * values[2] - values[1]]
    return (8 * first[1] - first[0]) / 7


def _half_space_point(quantity: Quantity) -> float:
    corner = quantity.details["place"] == "corner"

    def read(side: float) -> float:
        solution, where = _pad_on_cube(side, 1.0, 1.0)
        place = (where[0], where[2], 0.0) if corner else (side / 2, side / 2, 0.0)
        return value_at(solution, place)

    return _half_space_limit(read)


def _half_space_mean(quantity: Quantity) -> float:
    """Mean rise times k / (q sqrt A) for a pad of unit area."""
    root = math.sqrt(quantity.details["ratio"])

    def read(side: float) -> float:
        solution, where = _pad_on_cube(side, root, 1 / root)
        return solution.mean("z_low", Rectangle(*where), tolerance=ACCURACY * solution.span).value

    return _half_space_limit(read)


def constriction(eps: float) -> float:
    """k sqrt(A) R of a square pad on a unit bar, cut at six widths: exp(-12 pi) = 4e-17."""
    where = (0.5 - eps / 2, 0.5 + eps / 2, 0.5 - eps / 2, 0.5 + eps / 2)
    pad = Wall("N", Cells(0.0, ((*where, 1 / eps**2),)))
    solution = solve(Case((1.0, 1.0, 6.0), (1.0, 1.0, 1.0), walls(z_low=pad, z_high=Wall("D"))).body())
    rise = solution.mean("z_low", Rectangle(*where), tolerance=ACCURACY * solution.span).value
    return eps * (rise - 6.0)


def _constriction(quantity: Quantity) -> float:
    return constriction(quantity.details["eps"])


def _constriction_slope(quantity: Quantity) -> float:
    """Slope a of psi_0 - a eps + b eps^3 + O(eps^5): two small pads take b out."""
    at_zero = 0.4732010044093393  # mean rise of a square on a half-space, ten digits in the same table
    slopes = [(at_zero - constriction(eps)) / eps for eps in (0.01, 0.02)]
    return (4 * slopes[0] - slopes[1]) / 3


def _twice_mean(quantity: Quantity) -> float:
    return 2 * _mean(quantity)


def _outflow(quantity: Quantity) -> float:
    return -_flux(quantity)


MEASURES: dict[str, Callable[[Quantity], float]] = {
    "potential": _potential,
    "below": _potential,
    "difference": _difference,
    "decay": _decay,
    "flux": _flux,
    "outflow": _outflow,
    "mean": _mean,
    "twice_mean": _twice_mean,
    "face_outflow": _face_outflow,
    "plane_total": _plane_total,
    "finite_part": _finite_part,
    "edge_coefficient": _edge_coefficient,
    "overshoot": _overshoot,
    "root": _root,
    "amplitude": _amplitude,
    "corner_contacts": _corner_contacts,
    "corner_relation": _corner_relation,
    "half_space_mean": _half_space_mean,
    "half_space_point": _half_space_point,
    "constriction": _constriction,
    "constriction_slope": _constriction_slope,
}
