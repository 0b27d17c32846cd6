"""Answers of one number, with a bound on its error."""

from __future__ import annotations

from dataclasses import dataclass

from service.core.unbounded import UnboundedCause


@dataclass(frozen=True)
class Bounded:
    """A number with a bound on its error."""

    value: float
    error_bound: float


@dataclass(frozen=True)
class Total:
    """Flow through a face, a part of it, or a plane.

    value, error_bound: None where the total is unbounded. causes: the lines that make it so.
    with_gap: the flow without a strip of the given width along those lines, where a gap was named.
    """

    value: float | None
    error_bound: float | None
    causes: tuple[UnboundedCause, ...] = ()
    with_gap: Bounded | None = None
