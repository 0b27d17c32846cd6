"""What an answer will cost, known before any of it is computed."""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.core import field, time_range
from service.core.field import Setting

# Factors of one line cost about this many multiplications a value: special functions and sums over breaks.
FACTOR_COST = 60.0

# Work arrays held at once for each factor value: the factor, its departure, its size and their products.
ARRAYS = 6.0

# The flux takes three more integrals on a finer rule, and its profiles taken out.
FLUX_COST = 8.0


@dataclass(frozen=True)
class Estimate:
    """multiplications: of all matrix products and factors. bytes: of the work arrays and the answer at once."""

    multiplications: float
    bytes: float


def on_grid(setting: Setting, shape: tuple[int, int, int], tolerance: float, with_flux: bool) -> Estimate:
    """Cost of a field on a grid of a shape."""
    nodes = _nodes(setting, tolerance)
    columns = sum(part.columns for part in setting.parts)
    widest = max((part.columns for part in setting.parts), default=1)
    breaks = max((part.knots(axis).size for part in setting.parts for axis in range(3)), default=2)
    points = math.prod(shape)
    times = FLUX_COST if with_flux else 1.0
    factors = nodes * sum(shape)
    return Estimate(
        times * (points * nodes * columns + factors * FACTOR_COST * (breaks * len(setting.parts) + columns)),
        8.0 * (factors * ARRAYS * (widest + breaks) + points * (8 if with_flux else 3)),
    )


def at_points(setting: Setting, count: int, tolerance: float, with_flux: bool) -> Estimate:
    """Cost of a field at points, which are served in runs."""
    nodes = _nodes(setting, tolerance)
    columns = sum(part.columns for part in setting.parts)
    widest = max((part.columns for part in setting.parts), default=1)
    breaks = max((part.knots(axis).size for part in setting.parts for axis in range(3)), default=2)
    times = FLUX_COST if with_flux else 1.0
    run = min(count, field.POINTS_AT_ONCE)
    return Estimate(
        times * 3 * count * nodes * FACTOR_COST * (breaks * len(setting.parts) + columns),
        8.0 * (3 * run * nodes * ARRAYS * (widest + breaks) + count * (8 if with_flux else 3)),
    )


def _nodes(setting: Setting, tolerance: float) -> float:
    """Nodes of the longest range any part can take: from the earliest time that is looked at to the last."""
    least = min(line.extent for line in setting.lines if not line.is_endless)
    last = time_range.CUT / time_range.slowest_rate(setting.lines)
    return (math.log(last / least**2) - math.log(time_range.EARLIEST_FOR_SLOPES)) / field.step_for(setting, tolerance)
