"""Influence matrices kept for the next question about pads of the same body: a pad that moved costs one column.

The matrix depends on the body at rest alone, so that data, flows and sources may change in between.
"""

from __future__ import annotations

import threading
from collections import OrderedDict
from collections.abc import Hashable, Sequence

from service.core.conditions import Film
from service.core.faces import axis_of
from service.core.fed_pads import Pad
from service.core.field import KeepGoing
from service.core.influence import Influence, influence
from service.core.problem import Body

# Matrices that are kept, and pads of the largest of them: 8 times 16 MiB with its bound.
MOST_KEPT, MOST_PADS = 8, 1024


class KeptMatrices:
    """A bounded dictionary for several threads, the least recently used given up first."""

    def __init__(self, limit: int) -> None:
        self.limit, self.hits, self.misses = limit, 0, 0
        self._kept: OrderedDict[Hashable, Influence] = OrderedDict()
        self._lock = threading.Lock()

    def __len__(self) -> int:
        return len(self._kept)

    def get(self, key: Hashable) -> Influence | None:
        """What is kept under a key, or None."""
        with self._lock:
            found = self._kept.get(key)
            self.hits, self.misses = self.hits + (found is not None), self.misses + (found is None)
            if found is not None:
                self._kept.move_to_end(key)
            return found

    def keep(self, key: Hashable, found: Influence) -> None:
        """Keep a matrix in place of an earlier one."""
        if len(found.pads) > MOST_PADS:
            return
        with self._lock:
            self._kept[key] = found
            self._kept.move_to_end(key)
            while len(self._kept) > self.limit:
                self._kept.popitem(last=False)


KEPT = KeptMatrices(MOST_KEPT)


def kept_influence(
    body: Body, pads: Sequence[Pad], *, tolerance: float, keep_going: KeepGoing | None = None
) -> Influence:
    """The influence matrix as `influence` has it, with what is still known of pads that did not move."""
    key = _at_rest(body, pads, tolerance)
    if key is None:
        return influence(body, pads, tolerance=tolerance, keep_going=keep_going)
    found = influence(body, pads, tolerance=tolerance, earlier=KEPT.get(key), keep_going=keep_going)
    KEPT.keep(key, found)
    return found


def _at_rest(body: Body, pads: Sequence[Pad], tolerance: float) -> Hashable | None:
    """All that a matrix depends on but its pads; None where nothing of it can be used again.

    The tolerance counts where pads are on faces that are not parallel, whose entries are had to it.
    """
    if body.has_mixed_face:
        return None
    faces = tuple(
        (face, type(condition), condition.coefficient if isinstance(condition, Film) else None)
        for face, condition in sorted(body.faces.items())
    )
    layers = tuple((layer.thickness, layer.conductivity, layer.contact_below) for layer in body.layers)
    parallel = len({axis_of(pad.face) for pad in pads}) <= 1
    return body.size, body.conductivity, body.infinite, layers, faces, None if parallel else tolerance
