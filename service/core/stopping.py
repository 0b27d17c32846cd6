"""Whether the one who asked still waits: for steps too deep, or kept for too long, to be handed `keep_going`.

What a solution has computed is kept for whoever asks next, each with a time of their own. So the steps of a refinement
ask for the call that runs in their thread, not for the one that made the solution.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from contextvars import ContextVar

KeepGoing = Callable[[], None]

_ASKER: ContextVar[KeepGoing | None] = ContextVar("asker", default=None)


@contextmanager
def on_behalf_of(keep_going: KeepGoing | None) -> Iterator[None]:
    """While it lasts, steps in this thread ask `keep_going`, or whom they asked before if that is None or `go_on`."""
    if keep_going is None or keep_going is go_on:
        yield
        return
    token = _ASKER.set(keep_going)
    try:
        yield
    finally:
        _ASKER.reset(token)


def go_on() -> None:
    """Raise Interrupted, or whatever the asker raises, if the answer is no longer waited for."""
    keep_going = _ASKER.get()
    if keep_going is not None:
        keep_going()
