"""From a body to its solution."""

from __future__ import annotations

from service.core import solution
from service.core.field import KeepGoing
from service.core.problem import Body, Film
from service.core.solution import Solution
from service.core.varying import VaryingSolution


def solve(body: Body, keep_going: KeepGoing | None = None) -> Solution:
    """Check that a body has a steady field and make it ready to be asked.

    keep_going: asked between the steps of an iteration, may raise Interrupted.
    Raises NoSteadyState, and OutsideLaw where the potential leaves the range of a conductivity law.
    """
    radiates = any(isinstance(condition, Film) and condition.radiation for condition in body.faces.values())
    if body.law is not None or radiates:
        return VaryingSolution(body, keep_going)
    return solution.solve(body)
