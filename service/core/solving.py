"""From a body to its solution."""

from __future__ import annotations

from service.core import solution
from service.core.field import KeepGoing
from service.core.mixed import solve_mixed
from service.core.problem import Body
from service.core.solution import Solution
from service.core.varying import VaryingSolution

# To which the flows of the pads of mixed faces are solved at first; they are refined when more is asked for.
FIRST_ACCURACY = 1e-3


def solve(body: Body, keep_going: KeepGoing | None = None) -> Solution:
    """Check that a body has a steady field and make it ready to be asked.

    keep_going: asked between the steps of an iteration, may raise Interrupted.
    Raises NoSteadyState, and OutsideLaw where the potential leaves the range of a conductivity law.
    """
    if body.varies:
        return VaryingSolution(body, keep_going)
    if body.has_mixed_face:
        return solve_mixed(body, accuracy=FIRST_ACCURACY, keep_going=keep_going)
    return solution.solve(body)
