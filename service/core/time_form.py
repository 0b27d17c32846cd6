"""The time form: a steady field as the time integral of three lines multiplied.

    u = integral from 0 to infinity of X(x, t) Y(y, t) Z(z, t) dt

by the trapezoidal rule in s = ln t, which converges exponentially since every factor is analytic in t and decays or
stays bounded in each sector |arg t| < pi / 2 (Trefethen and Weideman, SIAM Review 56, 2014). Ewald (1921) split
sums this way; the Green's-function literature calls it time partitioning (Cole, Beck, Haji-Sheikh and Litkouhi 2011).

Two parts of the integral are known in closed form and taken out first, because the rule alone would need endless
ranges: what the two lines along a driven face still show of their profiles at short times, and the part that never
decays when nothing leaves the body sideways.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.lines import laplace
from service.core.lines.line import Drive, Line, WallDrive
from service.core.lines.places import Places, TimeResponse
from service.core.lines.time_response import respond
from service.core.split import Part
from service.core.stopping import go_on
from service.core.time_error import step_error
from service.core.time_integral import Integral, Product
from service.core.time_range import CUT, is_undying, profile_is_taken_out, release_time, times_for, weights

FloatArray = NDArray[np.float64]

# Up to so many places along the shortest axis it does not pay to look for the nodes that matter at each.
FEW_PLACES = 8

Rows = Callable[[Line, Drive, Places, FloatArray], TimeResponse]


def integrate(
    lines: Sequence[Line], part: Part, places: Sequence[Places], step: float, rows: Rows = respond
) -> Integral:
    """Set up the time integral of one part on the tensor product of three sets of places.

    rows: how a line's answer is had, so that a caller may keep answers that several parts or quantities share.
    """
    go_on()
    times = times_for(lines, part, places, step, step_error(step))
    answers = [rows(lines[axis], part.drives[axis], places[axis], times) for axis in range(3)]
    nodes = _Nodes(times, weights(lines, times, step) * part.factor, release_time(lines), part.factor)
    if profile_is_taken_out(lines, part, places):
        products = _with_profile_taken_out(lines, part, places, answers, nodes)
    else:
        products = [Product(nodes.weights, (answers[0].total, answers[1].total, answers[2].total))]
    if is_undying(lines):
        products += _never_decaying(lines, part, places, answers, nodes)
    x, y, z = (answer.carried for answer in answers)
    return Integral(lines, part, places, times, step, tuple(products), (x, y, z))


def on_grid(integral: Integral) -> FloatArray:
    """The integral on the tensor product, shape (n_x, n_y, n_z), by matrix products."""
    return sum((_contract(product) for product in integral.products[1:]), start=_contract(integral.products[0]))


def at_points(integral: Integral) -> FloatArray:
    """The integral at points, the three sets of places read side by side, shape (n,)."""
    total = np.zeros(())
    for product in integral.products:
        x, y, z = product.factors
        total = total + ((x * y * z).sum(axis=2) * product.weights).sum(axis=1)
    return total


@dataclass(frozen=True, eq=False)
class _Nodes:
    """Nodes of the rule: times, weights with the part's factor, that factor, and the time scale on which a profile
    that was taken out is let go.
    """

    times: FloatArray
    weights: FloatArray
    release: float
    factor: float

    @property
    def kept(self) -> FloatArray:
        """1 less the share taken out, chi = 3 e^-r - 3 e^-2r + e^-3r with r = t / release: (1 - e^-r)^3."""
        return -(np.expm1(-self.times / self.release) ** 3)

    @property
    def all_gone(self) -> int:
        """The first node at which the share taken out is nothing."""
        return int(np.searchsorted(self.times, CUT * self.release))

    def transformed(self, line: Line, drive: Drive, places: Places) -> FloatArray:
        """Integral over all times of chi times a line's answer, shape (n, 1, n_columns)."""
        rates = np.sqrt(np.array([1.0, 2.0, 3.0]) / self.release)
        answers = laplace.transform(line, drive, places, rates)
        return np.einsum("ngr,g->nr", answers, np.array([3.0, -3.0, 1.0]))[:, None, :]


def _with_profile_taken_out(
    lines: Sequence[Line], part: Part, places: Sequence[Places], answers: Sequence[TimeResponse], nodes: _Nodes
) -> list[Product]:
    """AB Z = (AB - chi ab) Z + chi ab Z with a, b the initial profiles; the last is known in closed form.

    AB - chi ab = (A - a) B + a (B - b + b (1 - chi)), where each bracket keeps its digits.
    """
    wall = part.wall_axis
    assert wall is not None
    a, b = (axis for axis in range(3) if axis != wall)
    initial_a, initial_b = answers[a].initial[:, None, :], answers[b].initial[:, None, :]
    kernel = answers[wall].total
    departure_a, slow_b = answers[a].departure, answers[b].departure + initial_b * nodes.kept[None, :, None]
    gone = nodes.all_gone
    if gone < nodes.times.size:
        # AB itself once chi is nothing: the two products would cancel where no mode decays.
        departure_a = np.concatenate([departure_a[:, :gone], answers[a].total[:, gone:]], axis=1)
    closed = nodes.transformed(lines[wall], part.drives[wall], places[wall])

    def product(weights: FloatArray, at_a: FloatArray, at_b: FloatArray, at_wall: FloatArray) -> Product:
        ordered = {a: at_a, b: at_b, wall: at_wall}
        return Product(weights, (ordered[0], ordered[1], ordered[2]))

    return [
        product(nodes.weights, departure_a, answers[b].total, kernel),
        product(nodes.weights[:gone], initial_a, slow_b[:, :gone], kernel[:, :gone]),
        product(np.full(1, nodes.factor), initial_a, initial_b, closed),
    ]


def _never_decaying(
    lines: Sequence[Line],
    part: Part,
    places: Sequence[Places],
    answers: Sequence[TimeResponse],
    nodes: _Nodes,
) -> list[Product]:
    """What replaces the product of means, which never decays, in a body that loses nothing sideways.

    In a closed body it is dropped: the drives' means cancel, and the field is counted from its mean. In a bar with
    insulated sides it is the one-dimensional field along the bar, known in closed form.
    """
    limits = [_limit(lines[axis], part.drives[axis], places[axis])[:, None, :] for axis in range(3)]
    along = next((axis for axis in range(3) if lines[axis].is_endless), None)
    if along is None:
        # The integral of chi is release (3 - 3/2 + 1/3).
        dropped = float(nodes.weights @ nodes.kept) + nodes.factor * nodes.release * 11 / 6
        return [Product(np.array([-dropped]), (limits[0], limits[1], limits[2]))]
    steady = laplace.transform(lines[along], part.drives[along], places[along], np.zeros(1))
    steady = steady - nodes.transformed(lines[along], part.drives[along], places[along])

    def product(weights: FloatArray, at_bar: FloatArray) -> Product:
        x, y, z = (at_bar if axis == along else limit for axis, limit in enumerate(limits))
        return Product(weights, (x, y, z))

    return [product(-nodes.weights * nodes.kept, answers[along].total), product(np.full(1, nodes.factor), steady)]


def _limit(line: Line, drive: Drive, places: Places) -> FloatArray:
    """What a line that keeps its mean comes to, shape (n, n_columns); zero for another line."""
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    if not line.keeps_its_mean or places.order == -1:
        return np.zeros((places.low.size, columns))
    span = np.ones(places.low.size) if places.high is None else (places.high - places.low) * line.scale
    return span[:, None] * line.mean(drive)


def _contract(product: Product) -> FloatArray:
    """Sum over nodes and columns on the tensor product, one matrix product for each place of the shortest axis."""
    nodes = max(factor.shape[1] for factor in product.factors)
    columns = max(factor.shape[2] for factor in product.factors)
    shape = [factor.shape[0] for factor in product.factors]
    loop = int(np.argmin(shape))
    first, second = (axis for axis in range(3) if axis != loop)
    if shape[loop] <= FEW_PLACES and columns == 1:
        return _contract_few(product, loop, first, second)
    flat = [
        np.broadcast_to(factor, (factor.shape[0], nodes, columns)).reshape(factor.shape[0], -1)
        for factor in product.factors
    ]
    weighted = flat[loop] * np.repeat(np.broadcast_to(product.weights, nodes), columns)
    right = np.ascontiguousarray(flat[second].T)
    size = np.abs(flat[first]).max(axis=0) * np.abs(flat[second]).max(axis=0)
    result = np.empty((shape[loop], shape[first], shape[second]))
    for index, row in enumerate(weighted):
        kept = _kept(np.abs(row) * size)
        np.matmul(flat[first][:, kept] * row[kept], right[kept], out=result[index])
    return np.moveaxis(result, 0, loop)


def _contract_few(product: Product, loop: int, first: int, second: int) -> FloatArray:
    """The same for a product of single columns at few places along an axis: a plane or a line."""
    rows, left, right = (np.asarray(product.factors[axis][:, :, 0]) for axis in (loop, first, second))
    if right.shape[1] == 1:
        left, right = right, left
        first, second = second, first
    weighted = rows * product.weights
    if right.shape[1] == 1:
        planes = [row.sum() * (left @ right.T) for row in weighted]
    else:
        planes = [(left * row) @ right.T for row in weighted]
    result = np.stack(planes)
    return np.moveaxis(result if first < second else result.swapaxes(1, 2), 0, loop)


def _kept(sizes: FloatArray) -> slice:
    """The run of nodes outside of which nothing adds a digit: few times matter at any one distance."""
    needed = np.flatnonzero(sizes > 1e-18 * sizes.sum())
    return slice(needed[0], needed[-1] + 1) if needed.size else slice(0, 0)
