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

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from service.core.lines import laplace
from service.core.lines.images import LATEST
from service.core.lines.line import Drive, Line, WallDrive, breaks_of, wall_distance
from service.core.lines.modes import eigen_integrals, modes_of
from service.core.lines.time_response import MODE_COUNT, Places, TimeResponse, respond
from service.core.maps import Profiles
from service.core.split import Part

FloatArray = NDArray[np.float64]
Factors = tuple[FloatArray, FloatArray, FloatArray]

# The range of integration ends where the integrand is below exp(-CUT) = 4e-18 of its size; what is cut at both ends
# is below CUT_ERROR of what drives the body.
CUT, CUT_ERROR = 40.0, 2e-17

# Angle kept between the contour shifted by i (pi / 2 - ANGLE) and the edge of the sector, in the error bound; near
# the best for steps around 0.3.
ANGLE = 0.12

# Steps in ln t outside this range are not taken: coarser saves little, finer is below rounding.
COARSEST_STEP, FINEST_STEP = 0.5, 0.2

# Rounding in a product of three factors, relative to what their lines carry: special functions, sums over breaks.
ROUNDING = 8e-15

# Where a line leaves its profile at once, as sqrt(t), the range begins where that is below rounding; a slope on a
# driven face meets it with t^(-3/2) and needs its square.
# The first is a part of the rule's own error.
EARLIEST, EARLIEST_FOR_SLOPES = 1e-3, 1e-30

# Up to so many places along the shortest axis it does not pay to look for the nodes that matter at each.
FEW_PLACES = 8

# Ranges begin at multiples of this in ln t.
LATTICE = 3.0

# Part of the slowest time constant by which every range has begun: (t / release)^(5/2) is then below rounding.
LATEST_BEGINNING = 3e-7

Rows = Callable[[Line, Drive, Places, FloatArray], TimeResponse]


@dataclass(frozen=True, eq=False)
class Product:
    """Sum over nodes q and columns r of weight_q X_iqr Y_jqr Z_kqr.

    factors: shape (n, n_nodes, n_columns) each; a factor may have 1 in place of n_nodes or n_columns.
    """

    weights: FloatArray
    factors: Factors


@dataclass(frozen=True, eq=False)
class Integral:
    """A part's time integral on the product of three sets of places.

    products: what to add up. carried: for each axis, what rounding in its factor refers to at each node, shape
    (1, n_nodes, n_columns). step: in ln t. power: of 1 / sin(ANGLE) in the error of the rule.
    """

    products: tuple[Product, ...]
    carried: Factors
    step: float
    power: float
    node_count: int


def step_error(step: float, power: float = 2.5) -> float:
    """Relative error of the trapezoidal rule in ln t, on the integral of absolute values.

    On the contour shifted by i d, d = pi / 2 - ANGLE, a kernel w^p exp(-w^2) t^(-q) with w = distance / 2 sqrt t is
    (1 / sin ANGLE)^(p / 2 + q) times what it is at the time t / sin(ANGLE): 1/2 for each of three lines that carry
    a profile, 1 more for a driven end (q = 1, p = 1), 1 more again for its slope (q = 3/2, p = 2). The rule's error
    is 2 / (exp(2 pi d / step) - 1) times the integral on that contour.
    """
    shift = math.pi / 2 - ANGLE
    return 2 * math.sin(ANGLE) ** -power / math.expm1(2 * math.pi * shift / step)


def step_for(relative_error: float) -> float:
    """The coarsest step whose error is below the one given, within the range worth taking."""
    shift = math.pi / 2 - ANGLE
    step = 2 * math.pi * shift / math.log1p(2 * math.sin(ANGLE) ** -2.5 / max(relative_error, 1e-30))
    return min(max(step, FINEST_STEP), COARSEST_STEP)


def integrate(
    lines: Sequence[Line], part: Part, places: Sequence[Places], step: float, rows: Rows = respond
) -> Integral:
    """Set up the time integral of one part on the tensor product of three sets of places.

    rows: how a line's answer is had, so that a caller may keep answers that several parts or quantities share.
    """
    smooth = _profile_is_taken_out(lines, part, places)
    slowest = slowest_rate(lines)
    last = CUT / slowest
    undying = _undying(lines)
    first = _first_time(lines, part, places, smooth, EARLIEST * step_error(step))
    # A plain integrand begins only when the front from its end arrives; the others begin with what is let go.
    first = min(first, LATEST_BEGINNING / slowest if smooth or undying else last / 16)
    # Parts that begin at about the same time begin together, and share the answers of their lines.
    begin = LATTICE * math.floor(math.log(first) / LATTICE)
    times = np.exp(step * np.arange(math.floor(begin / step), math.ceil(math.log(last) / step) + 1))
    answers = [rows(lines[axis], part.drives[axis], places[axis], times) for axis in range(3)]
    nodes = _Nodes(times, step * times * part.factor, 1 / slowest, part.factor)
    if smooth:
        products = _with_profile_taken_out(lines, part, places, answers, nodes)
    else:
        products = [Product(nodes.weights, (answers[0].total, answers[1].total, answers[2].total))]
    if undying:
        products += _never_decaying(lines, part, places, answers, nodes)
    carried = [_carried(lines[axis], part.drives[axis], places[axis], times) for axis in range(3)]
    power = 1.5 if part.wall_axis is None else 3.5 if places[part.wall_axis].order == -1 else 2.5
    return Integral(tuple(products), (carried[0], carried[1], carried[2]), step, power, times.size)


def slowest_rate(lines: Sequence[Line]) -> float:
    """Decay rate of the slowest product of modes, not counting one that does not decay at all."""
    finite = [line for line in lines if not line.is_endless]
    rates = [modes_of(line, 2).rates for line in finite]
    together = sum(float(rate[0]) for rate in rates)
    return together if together > 0 else min(float(rate[1]) for rate in rates)


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


def bound_everywhere(integral: Integral) -> float:
    """One error bound for all places, less sharp than the others and quick."""
    total, relative = 0.0, step_error(integral.step, integral.power)
    for product in integral.products:
        most = [_widened(np.abs(f).max(axis=0, keepdims=True), integral.step) for f in product.factors]
        total += relative * float(_weigh(most[0] * most[1] * most[2], product.weights)[0])
        total += ROUNDING * float(_rounded(integral, product, most)[0])
    return total


def bound_on_grid(integral: Integral) -> Factors:
    """Error bounds for each coordinate of a grid, shape (n,) each; each of the three holds, so the least does."""
    bounds = [np.zeros(factor.shape[0]) for factor in integral.products[0].factors]
    relative = step_error(integral.step, integral.power)
    for product in integral.products:
        sizes = [_widened(np.abs(factor), integral.step) for factor in product.factors]
        most = [size.max(axis=0, keepdims=True) for size in sizes]
        rounding = ROUNDING * float(_rounded(integral, product, most)[0])
        for axis in range(3):
            others = most[(axis + 1) % 3] * most[(axis + 2) % 3]
            bounds[axis] += relative * _weigh(sizes[axis] * others, product.weights) + rounding
    return bounds[0], bounds[1], bounds[2]


def bound_at_points(integral: Integral) -> FloatArray:
    """Error bound at each point, shape (n,)."""
    total = np.zeros(())
    relative = step_error(integral.step, integral.power)
    for product in integral.products:
        sizes = [_widened(np.abs(factor), integral.step) for factor in product.factors]
        total = total + relative * _weigh(sizes[0] * sizes[1] * sizes[2], product.weights)
        total = total + ROUNDING * _rounded(integral, product, sizes)
    return total


def _rounded(integral: Integral, product: Product, sizes: Sequence[FloatArray]) -> FloatArray:
    """Sum over nodes of what rounding refers to: a factor's own size, or what its modes carry where they cancel."""
    if product.weights.size == 1:
        return _weigh(sizes[0] * sizes[1] * sizes[2], product.weights)
    x, y, z = (np.maximum(size, carried) for size, carried in zip(sizes, integral.carried, strict=True))
    return _weigh(x * y * z, product.weights)


def _carried(line: Line, drive: Drive, places: Places, times: FloatArray) -> FloatArray:
    """Size of the modes that a line's late answers are summed from, shape (1, n_times, n_columns); 0 before that.

    Early answers are sums of images that keep their digits where they are small.
    """
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    sizes = np.zeros((1, times.size, columns))
    if line.is_endless:
        return sizes
    late = times > LATEST * line.extent**2
    modes = modes_of(line, 2)
    strengths = np.abs(eigen_integrals(line, drive, MODE_COUNT))
    slowest = np.abs(places.mode_shapes(line)[:, 0]).max()
    factor = float(modes.wave_numbers[1]) if places.order == -1 else 1.0
    if places.high is not None:
        factor = float((places.high - places.low).max()) * line.scale
    # The slowest mode as it is at the places asked; the others by the strongest of them, at the pace of the second.
    decay = np.exp(-np.outer(times[late], modes.rates))
    sizes[0, late] = decay[:, :1] * strengths[0] * float(slowest)
    sizes[0, late] += decay[:, 1:] * strengths[1:].max(axis=0) * factor
    return sizes


def _weigh(sizes: FloatArray, weights: FloatArray) -> FloatArray:
    return (sizes.sum(axis=2) * np.abs(weights)).sum(axis=1)


def _widened(sizes: FloatArray, step: float) -> FloatArray:
    """At each node the largest size within a factor 1 / sin(ANGLE) in time, which bounds it on the shifted contour.

    There a front is as wide as it is that much later, and a mode has decayed as little as it has that much earlier.
    """
    if sizes.shape[1] == 1:
        return sizes
    reach = math.ceil(-math.log(math.sin(ANGLE)) / step)
    return np.asarray(maximum_filter1d(sizes, 2 * reach + 1, axis=1, mode="nearest"))


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

    def transformed(self, line: Line, drive: Drive, places: Places) -> FloatArray:
        """Integral over all times of chi times a line's answer, shape (n, 1, n_columns)."""
        rates = np.sqrt(np.array([1.0, 2.0, 3.0]) / self.release)
        answers = laplace.transform(line, drive, places, rates)
        return np.einsum("ngr,g->nr", answers, np.array([3.0, -3.0, 1.0]))[:, None, :]


def _profile_is_taken_out(lines: Sequence[Line], part: Part, places: Sequence[Places]) -> bool:
    """Whether the driven line is asked on its driven end, or for a slope, where its kernel is not integrable alone."""
    if part.wall_axis is None:
        return False
    drive, asked = part.drives[part.wall_axis], places[part.wall_axis]
    assert isinstance(drive, WallDrive)
    if asked.order == -1:
        return True
    end = lines[part.wall_axis].length if drive.high else 0.0
    return bool((asked.low == end).any() or (asked.high is not None and (asked.high == end).any()))


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
    slow_b = answers[b].departure + initial_b * nodes.kept[None, :, None]
    closed = nodes.transformed(lines[wall], part.drives[wall], places[wall])

    def product(weights: FloatArray, at_a: FloatArray, at_b: FloatArray, at_wall: FloatArray) -> Product:
        ordered = {a: at_a, b: at_b, wall: at_wall}
        return Product(weights, (ordered[0], ordered[1], ordered[2]))

    return [
        product(nodes.weights, answers[a].departure, answers[b].total, kernel),
        product(nodes.weights, initial_a, slow_b, kernel),
        product(np.full(1, nodes.factor), initial_a, initial_b, closed),
    ]


def _undying(lines: Sequence[Line]) -> bool:
    """Whether the product of the lines' means never decays: a closed body, or a bar with insulated sides."""
    sides_keep = lines[0].keeps_its_mean and lines[1].keeps_its_mean
    return sides_keep and (lines[2].keeps_its_mean or lines[2].is_endless)


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
    if lines[2].keeps_its_mean:
        # The integral of chi is release (3 - 3/2 + 1/3).
        dropped = float(nodes.weights @ nodes.kept) + nodes.factor * nodes.release * 11 / 6
        return [Product(np.array([-dropped]), (limits[0], limits[1], limits[2]))]
    steady = laplace.transform(lines[2], part.drives[2], places[2], np.zeros(1))
    steady = steady - nodes.transformed(lines[2], part.drives[2], places[2])
    return [
        Product(-nodes.weights * nodes.kept, (limits[0], limits[1], answers[2].total)),
        Product(np.full(1, nodes.factor), (limits[0], limits[1], steady)),
    ]


def _limit(line: Line, drive: Drive, places: Places) -> FloatArray:
    """What a line that keeps its mean comes to, shape (n, n_columns); zero for another line."""
    columns = 1 if isinstance(drive, WallDrive) else drive.n_profiles
    if not line.keeps_its_mean or places.order == -1:
        return np.zeros((places.low.size, columns))
    if isinstance(drive, WallDrive):
        mean = np.ones(1) / line.extent
    else:
        mean = drive.integrals(np.zeros(1), np.array([line.length]))[0] / line.length
    span = np.ones(places.low.size) if places.high is None else (places.high - places.low) * line.scale
    return span[:, None] * mean


def _first_time(
    lines: Sequence[Line], part: Part, places: Sequence[Places], smooth: bool, earliest: float
) -> float:
    """Where the integrand begins to matter.

    A front from a jump matters as soon as it arrives at the nearest place that is not on the jump itself. A kink, a
    film end or the end of an interval matters from the beginning, but only as sqrt(t).
    """
    wall = part.wall_axis
    if wall is not None and not smooth:
        return _nearest_to_wall(lines[wall], part.drives[wall], places[wall]) ** 2 / (4 * CUT)
    slopes = any(asked.order == -1 for asked in places)
    least = min(line.extent for line in lines if not line.is_endless)
    film = max((film for line in lines for film in (line.film_low, line.film_high) if film < math.inf), default=0.0)
    floor = least**2 * (
        EARLIEST_FOR_SLOPES / (1 + film * least) ** 2 if slopes else earliest / (1 + film * least)
    )
    if wall is None and not slopes:
        return floor
    if wall is not None and _film_at(lines[wall], part.drives[wall]) > 0:
        # The kernel of a held end, or of a film like it, is large up to the square of the distance from it.
        floor = min(floor, _nearest_to_wall(lines[wall], part.drives[wall], places[wall]) ** 2 / (4 * CUT))
    along = [axis for axis in range(3) if axis != wall]
    jump, other = np.min([_nearest_to_break(lines[axis], part.drives[axis], places[axis]) for axis in along], axis=0)
    return float(min(jump**2 / (4 * CUT), max(other**2 / (4 * CUT), floor), least**2))


def _film_at(line: Line, drive: Drive) -> float:
    assert isinstance(drive, WallDrive)
    return line.film_high if drive.high else line.film_low


def _nearest_to_wall(line: Line, drive: Drive, places: Places) -> float:
    """Least scaled distance from the driven end, of places that are not on it."""
    assert isinstance(drive, WallDrive)
    ends = [places.low] if places.high is None else [places.low, places.high]
    distances = np.concatenate([wall_distance(line, end, high=drive.high) for end in ends])
    return float(distances[distances > 0].min(initial=line.extent))


def _nearest_to_break(line: Line, drive: Drive, places: Places) -> tuple[float, float]:
    """Least scaled distance to a jump from a place not on it, and to a kink or film end; infinite if there is none.

    Intervals may end on a break, which shows as sqrt(t) like a kink.
    """
    assert isinstance(drive, Profiles)
    if places.high is not None:
        return math.inf, 0.0
    breaks = breaks_of(line, drive)
    knots, jumps, slope_jumps = breaks.knots, breaks.jumps, breaks.slope_jumps
    has_jump, has_kink = jumps.any(axis=1), slope_jumps.any(axis=1)
    ends = [(0, line.film_low)] if line.is_endless else [(0, line.film_low), (-1, line.film_high)]
    for index, film in ends:
        # An insulated end mirrors the profile; behind a film the profile begins to change as sqrt(t).
        has_kink[index] |= has_jump[index] and 0.0 < film < math.inf
        has_jump[index] &= film == math.inf
    distances = np.abs(places.low[:, None] - knots) * line.scale
    near_jump = distances[:, has_jump]
    other = float(distances[:, has_kink].min(initial=math.inf))
    if places.order == -1 and (near_jump == 0).any():
        # On a held end the slope begins as 1 / sqrt(t).
        other = 0.0
    return float(near_jump[near_jump > 0].min(initial=math.inf)), other


def _contract(product: Product) -> FloatArray:
    """Sum over nodes and columns on the tensor product, one matrix product for each place of the shortest axis."""
    nodes = max(factor.shape[1] for factor in product.factors)
    columns = max(factor.shape[2] for factor in product.factors)
    shape = [factor.shape[0] for factor in product.factors]
    loop = int(np.argmin(shape))
    first, second = (axis for axis in range(3) if axis != loop)
    flat = [
        np.broadcast_to(factor, (factor.shape[0], nodes, columns)).reshape(factor.shape[0], -1)
        for factor in product.factors
    ]
    weighted = flat[loop] * np.repeat(np.broadcast_to(product.weights, nodes), columns)
    if shape[loop] <= FEW_PLACES:
        few = np.stack([(flat[first] * row) @ flat[second].T for row in weighted])
        return np.moveaxis(few, 0, loop)
    right = np.ascontiguousarray(flat[second].T)
    size = np.abs(flat[first]).max(axis=0) * np.abs(flat[second]).max(axis=0)
    result = np.empty((shape[loop], shape[first], shape[second]))
    for index, row in enumerate(weighted):
        kept = _kept(np.abs(row) * size)
        np.matmul(flat[first][:, kept] * row[kept], right[kept], out=result[index])
    return np.moveaxis(result, 0, loop)


def _kept(sizes: FloatArray) -> slice:
    """The run of nodes outside of which nothing adds a digit: few times matter at any one distance."""
    needed = np.flatnonzero(sizes > 1e-18 * sizes.sum())
    return slice(needed[0], needed[-1] + 1) if needed.size else slice(0, 0)
