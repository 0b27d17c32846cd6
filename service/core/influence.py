"""What a unit of flow into one pad raises at every other: the influence matrix of pads on faces of a body.

    M_ij = mean rise over pad i for a unit of flow into pad j, with every held value and ambient at zero

is symmetric (Green's reciprocity; Carslaw and Jaeger 1959, section 14.1). For pads on faces square to one axis it is
one time integral, see `influence_matrix`; between others, and beside mixed faces, a field is solved for each pad.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core import influence_matrix
from service.core.faces import axis_of
from service.core.fed_pads import Pad, check_pads, environment, with_flow_into
from service.core.field import KeepGoing
from service.core.problem import Body
from service.core.solving import solve
from service.core.split import lines_of

FloatArray = NDArray[np.float64]

# Pads whose means are had a second time by the general integral.
CHECKED_PADS = 3


@dataclass(frozen=True, eq=False)
class Influence:
    """Mean rises per unit flow of pads.

    mean, bound: shape (n, n), symmetric; row: the pad that is read, column: the pad that flow goes into.
    agreement: largest difference between an entry and the same by the general integral, from pad to pad and back.
    agreement_bound: what that may be. checked: how many entries were compared.
    """

    pads: tuple[Pad, ...]
    mean: FloatArray
    bound: FloatArray
    agreement: float
    agreement_bound: float
    checked: int


def influence(
    body: Body,
    pads: Sequence[Pad],
    *,
    tolerance: float,
    earlier: Influence | None = None,
    keep_going: KeepGoing | None = None,
) -> Influence:
    """The influence matrix of pads on insulated, given-inflow or film faces of a body.

    tolerance: of the entries that are checked, in potential per flow. earlier: of the same body; what it says of pads
    that are still where they were is taken from it, so that a pad that moved costs one column.
    Raises NotPhysical for a pad on a held face or outside its face, NoSteadyState where flow into a pad has no way out.
    """
    check_pads(body, pads)
    if body.has_mixed_face:
        return _column_by_column(body, pads, tolerance, keep_going)
    lines = influence_matrix.lines_driven_by(pads, lines_of(body))
    n = len(pads)
    mean, bound = np.zeros((n, n)), np.zeros((n, n))
    known = _taken_over(pads, earlier, mean, bound)
    for axis in range(3):
        of_axis = np.array([index for index, pad in enumerate(pads) if axis_of(pad.face) == axis], dtype=int)
        new = of_axis[~known[of_axis]]
        if new.size:
            rows, columns = [pads[index] for index in of_axis], [pads[index] for index in new]
            block, error = influence_matrix.of_axis(body, lines, rows, columns, keep_going)
            mean[np.ix_(of_axis, new)], bound[np.ix_(of_axis, new)] = block, error
            mean[np.ix_(new, of_axis)], bound[np.ix_(new, of_axis)] = block.T, error.T
    for j, column in enumerate(pads):
        others = [i for i in range(n) if axis_of(pads[i].face) != axis_of(column.face) and (i < j or known[i])]
        if others and not known[j]:
            driven = solve(with_flow_into(environment(body), column, 1.0))
            for i in others:
                found = driven.mean(pads[i].face, pads[i].where, tolerance=tolerance)
                mean[i, j] = mean[j, i] = found.value
                bound[i, j] = bound[j, i] = found.error_bound
            if keep_going is not None:
                keep_going()
    if known.all() and earlier is not None and n:
        checked = earlier.agreement, earlier.agreement_bound, earlier.checked
    else:
        checked = _agreement(body, pads, np.flatnonzero(~known), mean, bound, tolerance)
    return Influence(tuple(pads), mean, bound, *checked)


def _column_by_column(body: Body, pads: Sequence[Pad], tolerance: float, keep_going: KeepGoing | None) -> Influence:
    """The matrix where held or film pads take part: a field for each pad, read at all of them.

    The difference between an entry and its mirror image is the check.
    """
    n, rest = len(pads), environment(body)
    mean, bound = np.zeros((n, n)), np.zeros((n, n))
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(rest, column, 1.0), keep_going)
        for face in {pad.face for pad in pads}:
            rows = [i for i, pad in enumerate(pads) if pad.face == face]
            found = driven.means(face, [pads[i].where for i in rows], tolerance=tolerance)
            mean[rows, j] = [entry.value for entry in found]
            bound[rows, j] = [entry.error_bound for entry in found]
    differences, allowed = np.abs(mean - mean.T), bound + bound.T
    return Influence(
        tuple(pads),
        0.5 * (mean + mean.T),
        0.5 * allowed,
        float(differences.max(initial=0.0)),
        float(allowed.max(initial=0.0)),
        n * n,
    )


def peaks(
    body: Body, pads: Sequence[Pad], *, tolerance: float, keep_going: KeepGoing | None = None
) -> tuple[FloatArray, FloatArray]:
    """Highest rise on each pad (row) for a unit of flow into each pad (column), and its bounds, (n, n) each.

    It is not symmetric. Every entry is searched for on its own, to the tolerance in potential per flow.
    """
    check_pads(body, pads)
    n, rest = len(pads), environment(body)
    highest, bound = np.empty((n, n)), np.empty((n, n))
    for j, column in enumerate(pads):
        driven = solve(with_flow_into(rest, column, 1.0), keep_going)
        for i, row in enumerate(pads):
            place = driven.peak(row.face, row.where, tolerance=tolerance, keep_going=keep_going)
            highest[i, j], bound[i, j] = place.value, place.error_bound
    return highest, bound


def _taken_over(
    pads: Sequence[Pad], earlier: Influence | None, mean: FloatArray, bound: FloatArray
) -> NDArray[np.bool_]:
    """Fill in what an earlier matrix says; returns of which pads it knows, shape (n,)."""
    if earlier is None:
        return np.zeros(len(pads), dtype=bool)
    place = {(pad.face, pad.where): index for index, pad in enumerate(earlier.pads)}
    found = np.array([place.get((pad.face, pad.where), -1) for pad in pads])
    known = found >= 0
    here, there = np.ix_(known, known), np.ix_(found[known], found[known])
    mean[here], bound[here] = earlier.mean[there], earlier.bound[there]
    return known


def _agreement(
    body: Body,
    pads: Sequence[Pad],
    new: NDArray[np.intp],
    mean: FloatArray,
    bound: FloatArray,
    tolerance: float,
) -> tuple[float, float, int]:
    """Some entries of new pads had a second time by the general integral: a pad over itself, to the next and back."""
    largest, allowed, checked = 0.0, 0.0, 0
    rest = environment(body)
    for j in new[np.unique(np.linspace(0, new.size - 1, min(new.size, CHECKED_PADS)).round().astype(int))]:
        own, other = int(j), (int(j) + 1) % len(pads)
        driven = {column: solve(with_flow_into(rest, pads[column], 1.0)) for column in {own, other}}
        for row, column in dict.fromkeys([(own, own), (other, own), (own, other)]):
            found = driven[column].mean(pads[row].face, pads[row].where, tolerance=tolerance)
            largest = max(largest, abs(found.value - float(mean[row, column])))
            allowed = max(allowed, found.error_bound + float(bound[row, column]))
            checked += 1
    return largest, allowed, checked
