"""What an answer will cost, known before any of it is computed."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from service.core import field, time_range
from service.core.field import Setting
from service.core.lines import curves, stack_response
from service.core.profiles import Profiles
from service.core.split import Part

# Costs in multiplications of plain array arithmetic, about 10^9 a second, as measured on the bodies of the tests.
# A special function at one place, break and time; all passes over a factor value; one step of a matrix product.
FUNCTION, PASS, IN_PRODUCT = 40.0, 25.0, 0.2

# Every part takes so many calls of array functions that they cost this much however few the numbers.
PART = 2e6

# A wave in a layer of a stack at one place, and what a layer takes before any place is asked, for one s.
IN_LAYER, OF_LAYER, INVERTED_HELD = 120.0, 400.0, 4.0

# The flux takes three integrals more, each with its profile taken out, on a finer rule and a longer range.
FLUX = 7.0

# Arrays of a factor's size, and of the size of its breaks, held at once.
FACTORS_HELD, BREAKS_HELD = 12.0, 5.0

# Arrays of a kernel of curved profiles held at once: all orders of two functions, and as many in passing.
CURVES_HELD = 60.0

# Part of all sources of curved profiles, times and places that is heard from.
HEARD = 0.25


@dataclass(frozen=True)
class Estimate:
    """multiplications: of plain array arithmetic, about 10^9 a second. bytes: of all arrays held at once."""

    multiplications: float
    bytes: float


def on_grid(setting: Setting, shape: tuple[int, int, int], tolerance: float, with_flux: bool) -> Estimate:
    """Cost of a field on a grid of a shape."""
    points, nodes = math.prod(shape), _nodes(setting, tolerance)
    work = most = 0.0
    for part in setting.parts:
        factors, held = _factors(setting, part, shape, nodes)
        work += PART + factors + 2 * IN_PRODUCT * points * nodes * part.columns
        most = max(most, held)
    return Estimate((1 + FLUX * with_flux) * work, most + 8.0 * points * (10 if with_flux else 4))


def at_points(setting: Setting, count: int, tolerance: float, with_flux: bool) -> Estimate:
    """Cost of a field at points, which are served in runs."""
    nodes, run = _nodes(setting, tolerance), min(count, field.points_at_once(setting))
    runs = math.ceil(count / max(run, 1))
    work = most = 0.0
    for part in setting.parts:
        factors, held = _factors(setting, part, (run, run, run), nodes)
        work += runs * (PART + factors)
        most = max(most, held)
    return Estimate((1 + FLUX * with_flux) * work, most + 8.0 * count * 10)


def _factors(setting: Setting, part: Part, shape: Sequence[int], nodes: float) -> tuple[float, float]:
    """Cost of the factors of a part's three lines and of their bounds, and the memory they take."""
    work = held = 0.0
    for axis, places in enumerate(shape):
        drive, values = part.drives[axis], places * nodes
        kept = breaks = float(max(part.knots(axis).size, 1))
        if isinstance(drive, Profiles) and drive.is_curved:
            # Narrow pieces are point sources, heard at some times and from near; few values are held at once.
            breaks, kept = HEARD * curves.INNER_POINTS * breaks, 0.0
            held += 8.0 * CURVES_HELD * curves.VALUES_AT_ONCE
        work += values * (breaks * (FUNCTION + IN_PRODUCT * part.columns) + PASS * part.columns)
        held += 8.0 * values * (FACTORS_HELD * part.columns + BREAKS_HELD * kept)
    if setting.body.layers:
        # Each place hears from every layer that holds a profile, at all places on the parabola.
        heard = max(part.knots(2).size, 1)
        inverted = nodes * stack_response.PLACES
        work += inverted * heard * (IN_LAYER * shape[2] + OF_LAYER * len(setting.body.layers))
        held += 16.0 * INVERTED_HELD * stack_response.NUMBERS_AT_ONCE
    return work, held


def _nodes(setting: Setting, tolerance: float) -> float:
    """Nodes of the longest range any part can take: from the earliest time that is looked at to the last."""
    least, last = time_range.shortest(setting.lines), time_range.last_time(setting.lines)
    span = math.log(last / least**2) - math.log(time_range.EARLIEST_FOR_SLOPES)
    return span / field.step_for(setting, tolerance)
