"""Things kept ready for the next request, the least recently used given up first."""

from __future__ import annotations

import threading
from collections import OrderedDict
from collections.abc import Callable
from dataclasses import dataclass
from typing import Generic, TypeVar

Thing = TypeVar("Thing")


@dataclass(frozen=True)
class KeptReport:
    """How often something was found and not found, and how full the place is.

    size, limit: in the kept unit.
    """

    hits: int
    misses: int
    size: int
    limit: int


class Kept(Generic[Thing]):
    """A bounded dictionary for several threads.

    weight: what one thing counts against the limit; 1 by default.
    """

    def __init__(self, limit: int, weight: Callable[[Thing], int] = lambda _: 1) -> None:
        self._limit = limit
        self._weight = weight
        self._things: OrderedDict[str, Thing] = OrderedDict()
        self._size = 0
        self._hits = 0
        self._misses = 0
        self._lock = threading.Lock()

    def get(self, key: str) -> Thing | None:
        """The thing kept under a key, or None."""
        with self._lock:
            thing = self._things.get(key)
            if thing is None:
                self._misses += 1
                return None
            self._hits += 1
            self._things.move_to_end(key)
            return thing

    def keep(self, key: str, thing: Thing) -> None:
        """Keep a thing, unless it alone passes the limit."""
        weight = self._weight(thing)
        if weight > self._limit:
            return
        with self._lock:
            before = self._things.pop(key, None)
            if before is not None:
                self._size -= self._weight(before)
            self._things[key] = thing
            self._size += weight
            while self._size > self._limit:
                _, oldest = self._things.popitem(last=False)
                self._size -= self._weight(oldest)

    def report(self) -> KeptReport:
        """Hits, misses, size and limit so far."""
        with self._lock:
            return KeptReport(self._hits, self._misses, self._size, self._limit)
