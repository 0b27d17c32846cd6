"""Conductances between the held pads of a body's mixed faces: the flow through each for a unit of potential at another.

Everything else is at rest: held faces and ambients at zero, nothing given, nothing generated. The matrix G of flows
into the body is symmetric by reciprocity; -G_ij joins pads i and j, and the sum of a row joins its pad with the
environment.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import time_error
from service.core.bounded import Bounded
from service.core.errors import NoSteadyState, NotPhysical
from service.core.faces import Face
from service.core.field import KeepGoing
from service.core.mixed_base import Base, base_of, check_apart, pads_of
from service.core.mixed_pads import LEAST_OF_WORST
from service.core.mixed_panels import System, needs_balance, system_of, without_digits
from service.core.mixed_refinement import LEVELS, MOST_PANELS, Ladder
from service.core.panel_error import ORDER_OF_TOTALS
from service.core.panels import STEP
from service.core.problem import Body
from service.core.stopping import on_behalf_of

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PadNetwork:
    """What joins held pads.

    pads: face, index and name of each. conductance, error_bound: shape (n, n), flow into the body through pad i for a
    unit of potential at pad j, all others at zero; symmetric. closed: whether nothing but the pads takes up a flow, so
    that rows add up to zero.
    """

    pads: tuple[tuple[Face, int, str | None], ...]
    conductance: FloatArray
    error_bound: FloatArray
    closed: bool
    _levels: tuple[FloatArray, ...]
    _ladder: Ladder

    @property
    def to_environment(self) -> FloatArray:
        """Conductance from each pad to all that is not a pad, shape (n,); zero in a closed body."""
        return self._to_environment[0]

    @property
    def to_environment_bound(self) -> FloatArray:
        """Bounds of the conductances to the environment, shape (n,)."""
        return self._to_environment[1]

    @cached_property
    def _to_environment(self) -> tuple[FloatArray, FloatArray]:
        if self.closed:
            return np.zeros(len(self.pads)), np.zeros(len(self.pads))
        # Much less than the entries where pads are close: their sums converge by themselves.
        return self._limits([matrix.sum(axis=1) for matrix in self._levels], len(self.pads) * self._rounding_of_finest)

    def rises(self) -> tuple[FloatArray, FloatArray]:
        """Rise of each pad (row) above the environment for a unit of flow into each (column), the others passing none.

        With bounds, shape (n, n) each. Raises NotPhysical in a closed body, whose level is free.
        """
        if self.closed:
            raise NotPhysical("Nothing but the pads takes up a flow; their rises above an environment have no value.")
        try:
            inverses = [np.asarray(np.linalg.inv(matrix), dtype=float) for matrix in self._levels]
        except np.linalg.LinAlgError:
            raise without_digits(self._ladder.base) from None
        sums = np.abs(inverses[0]).sum(axis=1)
        return self._limits(inverses, self._rounding_of_finest * np.outer(sums, sums))

    @property
    def _rounding_of_finest(self) -> float:
        return _rounding(self._levels[0])

    def _limits(self, levels: Sequence[FloatArray], rounding: float | FloatArray) -> tuple[FloatArray, FloatArray]:
        """Limits of arrays at the three levels of a refinement, entry by entry, and their bounds."""
        values, bounds = np.empty(levels[0].shape), np.empty(levels[0].shape)
        allowed = np.broadcast_to(rounding, levels[0].shape)
        for index in np.ndindex(*levels[0].shape):
            entries = [Bounded(float(level[index]), float(allowed[index])) for level in levels]
            found = self._ladder.limit(entries)
            values[index], bounds[index] = found.value, found.error_bound
        # No entry errs by much less than the others: they are of one field.
        return values, np.maximum(bounds, LEAST_OF_WORST * bounds.max(initial=0.0))

    def resistance(self, first: int, second: int) -> Bounded:
        """Potential between two pads per flow from one to the other, the other pads letting nothing through."""
        if first == second:
            return Bounded(0.0, 0.0)
        drive = np.zeros(len(self.pads))
        drive[first], drive[second] = 1.0, -1.0
        found = []
        for matrix in self._levels:
            try:
                potential = self._potential(matrix, drive)
            except np.linalg.LinAlgError:
                raise without_digits(self._ladder.base) from None
            value = float(potential @ drive)
            found.append(Bounded(value, _rounding(matrix) * value**2))
        return self._ladder.limit(found)

    def _potential(self, matrix: FloatArray, drive: FloatArray) -> FloatArray:
        if not self.closed:
            return np.asarray(np.linalg.solve(matrix, drive))
        # The level is free, and the equations are consistent.
        return np.asarray(np.linalg.lstsq(matrix, drive, rcond=None)[0])


def pad_network(
    body: Body,
    asked: Sequence[tuple[Face, int]] | None = None,
    *,
    accuracy: float = 1e-6,
    most_panels: int = MOST_PANELS,
    keep_going: KeepGoing | None = None,
) -> PadNetwork:
    """The network of a body's held pads, those with a given flow included.

    asked: which, by face and number, each once, all if None; the others are held at zero, like the environment.
    accuracy: of every conductance, in parts of the largest. Where `most_panels` do not suffice the bounds say what was
    reached. Raises NotPhysical where no pad is held or one touches something else that is held, and NoSteadyState for
    a single pad from which nothing leads away.
    """
    with on_behalf_of(keep_going):
        return _network(Ladder(body, base_of(body), most_panels), asked, accuracy)


def _network(ladder: Ladder, asked: Sequence[tuple[Face, int]] | None, accuracy: float) -> PadNetwork:
    base = ladder.base
    numbers = {(spot.face, spot.pad): number for number, spot in enumerate(base.spots) if spot.is_held}
    held = list(numbers.values()) if asked is None else [numbers[pad] for pad in asked]
    if not held:
        raise NotPhysical("No pad is held; conductances join held pads.", ("faces", base.faces[0], "pads"))
    check_apart(ladder.body, [base.spots[number] for number in held])
    if len(held) == 1 and _is_closed(base, held):
        raise NoSteadyState(
            "A flow of {amount} into the held pad has no way out of this body: no face and no other pad is held or has "
            "a film, so that its rise has no end.",
            1.0,
            ("faces",),
        )
    count = ladder.counts[0]
    while True:
        levels, system = [], system_of(base, count)
        for level in range(LEVELS):
            levels.append(_conductances(system, held))
            if level < LEVELS - 1:
                system, _ = system.halved(np.zeros(system.matrix.shape[0]))
        network = _limit(ladder, held, levels)
        missed = float(network.error_bound.max()) / (accuracy * float(np.abs(network.conductance).max()))
        finer = ladder.finer(count, missed, ORDER_OF_TOTALS)
        if finer is None:
            return network
        count = finer


def _rounding(matrix: FloatArray) -> float:
    """What the rule in time may take an entry off by."""
    return time_error.step_error(STEP) * float(np.abs(matrix).max())


def _limit(ladder: Ladder, held: Sequence[int], levels: Sequence[FloatArray]) -> PadNetwork:
    base, n = ladder.base, len(held)
    values, bounds = np.empty((n, n)), np.empty((n, n))
    for i in range(n):
        for j in range(i + 1):
            entries = [Bounded(float(matrix[i, j]), _rounding(matrix)) for matrix in levels]
            found = ladder.limit(entries)
            values[i, j] = values[j, i] = found.value
            bounds[i, j] = bounds[j, i] = found.error_bound
    # The error of an entry is a product of what its two pads err by alone, and is not told as less than a part of it.
    alone = np.sqrt(np.diag(bounds))
    bounds = np.maximum(bounds, LEAST_OF_WORST * np.outer(alone, alone))
    pads = []
    for number in held:
        spot = base.spots[number]
        assert spot.pad is not None
        pads.append((spot.face, spot.pad, pads_of(ladder.body, spot.face)[spot.pad].name))
    return PadNetwork(tuple(pads), values, bounds, _is_closed(base, held), tuple(levels), ladder)


def _is_closed(base: Base, held: Sequence[int]) -> bool:
    """Whether nothing but these spots takes up a flow."""
    return needs_balance(base) and len(held) == len(base.spots)


def _conductances(system: System, held: Sequence[int]) -> FloatArray:
    """Flow through each held spot for a unit of potential at each, at one refinement."""
    units = np.eye(len(system.grids))[:, list(held)]
    potentials = system.spread(units)
    if not needs_balance(system.base):
        flows = system.summed(system.solve(potentials))
    else:
        answers = system.solve(np.column_stack([potentials, np.ones(len(potentials))]))
        flows, even = system.summed(answers[:, :-1]), system.summed(answers[:, -1:])
        # The constant left open is such that flows balance.
        flows = flows - even @ (flows.sum(axis=0) / even.sum())[None, :]
    spots = [system.base.spots[number] for number in held]
    # The base's film lets out its share of each, whose ambient is at zero.
    through_base = np.diag([system.base.coefficients[spot.face] * spot.area for spot in spots])
    matrix = flows[list(held)] - through_base
    return 0.5 * (matrix + matrix.T)
