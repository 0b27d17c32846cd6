"""Lines along which the flow out of a held face has no bound.

Beside the edge of two held faces that differ by J the flux is 2 k J / (pi r), beside a jump J inside a held face
k J / (pi r), with k the geometric mean of the conductivities across the line (elementary local solutions
u = 2 J theta / pi and J theta / pi). Each factor e by which a gap left out beside the line shrinks adds
`coefficient` to the total.

A bounded total is the limit of totals with a gap. The time integral of each part begins at a common time instead of
ending at a common gap, and the two differ by a constant: for a held face's own data f at an edge with another held
face, (2 / pi) k f per length, because  integral over r > gap of 2 / (pi r)  and the same cut in time at t0 differ by
(2 / pi) (1 + gamma / 2) there and by (2 / pi) gamma / 2 for the other face's data (gamma: Euler's constant).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Held, map_of
from service.core.faces import Face, axes_along, axis_of
from service.core.maps import FaceMap, Rectangle
from service.core.problem import Body
from service.core.profiles import EXACT_POINTS
from service.core.singular import edge_name, line_name, local_data

FloatArray = NDArray[np.float64]

# Where a jump, or the sum of jumps along a line, is below this part of the data's size it is zero: two maps that meet.
NO_JUMP = 1e-12


@dataclass(frozen=True)
class UnboundedCause:
    """Why a total has no bound.

    kind: "edge" of two held faces, "jump_line" inside a held face, "endless" for a side that goes on for ever, or
    "endless_plane" for one that does so along both of its axes.
    line: which. coefficient: flow gained for each factor e by which the gap shrinks; for "endless" flow per length,
    for "endless_plane" flow per area.
    largest_jump: largest difference of the values that meet.
    """

    kind: str
    line: str
    coefficient: float
    largest_jump: float


def unbounded_lines(body: Body, face: Face, rectangle: Rectangle) -> list[tuple[UnboundedCause, tuple[int, bool]]]:
    """Borders of a rectangle of a held face along which the flow out of it has no bound.

    Each with which border it is: the axis along the face (0 or 1) that the border is square to, and whether it is
    the high one. A line that the rectangle reaches across is no cause: the two sides cancel.
    """
    causes = []
    for index in (0, 1):
        for high in (False, True):
            cause = _border_cause(body, face, rectangle, index, high)
            if cause is not None:
                causes.append((cause, (index, high)))
    return causes


def _border_cause(body: Body, face: Face, rectangle: Rectangle, index: int, high: bool) -> UnboundedCause | None:
    axis = axis_of(face)
    across, along = axes_along(face)[index], axes_along(face)[1 - index]
    place, (low, top) = _border(rectangle, index, high)
    if math.isinf(place):
        return None
    own = map_of(body.faces[face])
    assert own is not None
    knots = own.second_knots if index == 0 else own.first_knots
    neighbour: FaceMap | None = None
    name, kind, share = line_name(face, across, place), "jump_line", 1.0
    other = body.face_at(across, place)
    if other is not None:
        condition = body.faces[other]
        if not isinstance(condition, Held):
            return None
        neighbour = condition.value
        along_first = axes_along(other)[0] == along
        knots = np.concatenate([knots, neighbour.first_knots if along_first else neighbour.second_knots])
        name, kind, share = edge_name(face, other), "edge", 2.0
    at, weights = _fine_rule(_with_interfaces(body, along, knots), low, top)
    if at.size == 0:
        return None
    jump, least = _jump_along(body, face, own, neighbour, index, place, high, at)
    end = body.end_of(face)
    weights = weights * _mean_conductivity(body, (axis, end), (across, place), at)
    return _cause(kind, name, share, jump, weights, least)


def _with_interfaces(body: Body, along: int, knots: FloatArray) -> FloatArray:
    """Knots along an axis, and the interfaces of a stack."""
    return np.concatenate([knots, body.interfaces]) if along == 2 else knots


def _mean_conductivity(body: Body, first: tuple[int, float], second: tuple[int, float], at: FloatArray) -> FloatArray:
    """Geometric mean of the conductivities across a line, which lies where two axes are at given places.

    at: places along the line, shape (n,).
    """
    fixed = dict([first, second])
    z = np.full_like(at, fixed[2]) if 2 in fixed else at
    return np.sqrt(body.conductivity_at(first[0], z) * body.conductivity_at(second[0], z))


def _cause(
    kind: str, name: str, factor: float, jump: FloatArray, weights: FloatArray, least: float
) -> UnboundedCause | None:
    """The cause that jumps along a line are; its coefficient is exactly 0 where they cancel, None without a jump."""
    # Along each stretch the jump is a polynomial: from its Gauss points to its ends.
    stretches = jump.reshape(-1, EXACT_POINTS)
    largest = float(max(np.abs(stretches).max(), np.abs(stretches @ _TO_ENDS).max()))
    if largest <= least:
        return None
    net, gross = float(weights @ jump), float(weights @ np.abs(jump))
    return UnboundedCause(kind, name, factor / math.pi * net if abs(net) > NO_JUMP * gross else 0.0, largest)


def unbounded_plane_lines(
    body: Body, axis: int, position: float, rectangle: Rectangle
) -> list[tuple[UnboundedCause, tuple[int, bool]]]:
    """Borders of a rectangle of an inner plane that lie on a held face just where its data jump across the plane.

    Each with which border it is, as for a face. The flux along the plane is k J / (pi r) there.
    """
    causes = []
    for index in (0, 1):
        across, along = axes_along(axis)[index], axes_along(axis)[1 - index]
        for high in (False, True):
            place, (low, top) = _border(rectangle, index, high)
            face = body.face_at(across, place)
            if face is None:
                continue
            condition = body.faces[face]
            if not isinstance(condition, Held):
                continue
            own, square = condition.value, axes_along(face).index(axis)
            knots = own.second_knots if axes_along(face)[1] == along else own.first_knots
            at, weights = _fine_rule(_with_interfaces(body, along, knots), low, top)
            if at.size == 0:
                continue
            weights = weights * _mean_conductivity(body, (axis, position), (across, place), at)
            below, above = (_side_value(own, square, position, at, from_above=side) for side in (False, True))
            least = NO_JUMP * float(max(np.abs(below).max(), np.abs(above).max())) + own.error
            name = line_name(face, axis, position)
            cause = _cause("jump_line", name, 1.0, below - above, weights, least)
            if cause is not None:
                causes.append((cause, (index, high)))
    return causes


# Values at the ends of a stretch from those at its Gauss points, shape (EXACT_POINTS, 2).
_POINTS = np.polynomial.legendre.leggauss(EXACT_POINTS)[0]
_TO_ENDS = np.linalg.solve(
    np.polynomial.legendre.legvander(_POINTS, EXACT_POINTS - 1).T,
    np.polynomial.legendre.legvander(np.array([-1.0, 1.0]), EXACT_POINTS - 1).T,
)


def _border(rectangle: Rectangle, index: int, high: bool) -> tuple[float, tuple[float, float]]:
    """Where a border lies and from where to where it runs."""
    p, q = (rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)
    across, along = (p, q) if index == 0 else (q, p)
    return across[1 if high else 0], along


def _fine_rule(knots: FloatArray, low: float, high: float) -> tuple[FloatArray, FloatArray]:
    """Gauss points and weights on each stretch between knots, exact for the data of both faces, curved ones too."""
    finite = knots[np.isfinite(knots)]
    if math.isinf(low):
        low = min(float(finite.min(initial=0.0)), high) - 1.0
    if math.isinf(high):
        high = max(float(finite.max(initial=0.0)), low) + 1.0
    cuts = np.unique(np.concatenate([[low, high], knots[(knots > low) & (knots < high)]]))
    nodes, weights = np.polynomial.legendre.leggauss(EXACT_POINTS)
    half = 0.5 * np.diff(cuts)
    middle = 0.5 * (cuts[1:] + cuts[:-1])
    return (middle[:, None] + half[:, None] * nodes).ravel(), (half[:, None] * weights).ravel()


def _jump_along(
    body: Body,
    face: Face,
    own: FaceMap,
    neighbour: FaceMap | None,
    index: int,
    place: float,
    high: bool,
    at: FloatArray,
) -> tuple[FloatArray, float]:
    """Own value less the other's along a border, and the least jump that is one."""
    inside = _side_value(own, index, place, at, from_above=not high)
    if neighbour is None:
        outside = _side_value(own, index, place, at, from_above=high)
    else:
        # On the neighbour the edge is where its own axis, square to this face, ends.
        across = axes_along(face)[index]
        end = body.end_of(face)
        position = 1 - axes_along(across).index(axes_along(face)[1 - index])
        outside = _side_value(neighbour, position, end, at, from_above=end == 0.0)
    least = NO_JUMP * float(max(np.abs(inside).max(), np.abs(outside).max())) + own.error
    return inside - outside, least if neighbour is None else least + neighbour.error


def _side_value(face_map: FaceMap, index: int, place: float, at: FloatArray, *, from_above: bool) -> FloatArray:
    """Values along a line of a map where one axis is at `place`, from its upper or lower side."""
    if face_map.is_uniform:
        return np.full_like(at, face_map.lowest)
    fixed = np.full_like(at, place)
    p, q = (fixed, at) if index == 0 else (at, fixed)
    values = local_data(face_map, p, q).values
    # The order of the four sides: (left, left), (left, right), (right, left), (right, right).
    by_side = values.reshape(2, 2, *at.shape) if index == 0 else values.reshape(2, 2, *at.shape).swapaxes(0, 1)
    return np.asarray(by_side[1 if from_above else 0].mean(axis=0))


def cut_constant(body: Body, face: Face, rectangle: Rectangle, reference: float) -> float:
    """What the cut in time adds to a held face's total at its edges with other held faces (see the module)."""
    axis, condition = axis_of(face), body.faces[face]
    if not isinstance(condition, Held):
        return 0.0
    own = condition.value.minus(reference)
    total = 0.0
    for index in (0, 1):
        across = axes_along(face)[index]
        for high in (False, True):
            place, (low, top) = _border(rectangle, index, high)
            knots = own.second_knots if index == 0 else own.first_knots
            at, weights = _fine_rule(_with_interfaces(body, axes_along(face)[1 - index], knots), low, top)
            if math.isinf(place) or at.size == 0:
                continue
            end = body.end_of(face)
            weights = weights * _mean_conductivity(body, (axis, end), (across, place), at)
            inside = _side_value(own, index, place, at, from_above=not high)
            other = body.face_at(across, place)
            if other is not None:
                if isinstance(body.faces[other], Held):
                    total += 2 / math.pi * float(weights @ inside)
            else:
                outside = _side_value(own, index, place, at, from_above=high)
                total += 1 / math.pi * float(weights @ (inside - outside))
    return total
