"""Time against the number of points and against the tolerance."""

from __future__ import annotations

import numpy as np

from service.core import Grid
from tests.benchmarks.bar_grid import GRID, field_on_grid
from tests.benchmarks.timing import shortest


def with_points_and_tolerance() -> list[str]:
    """Nanoseconds a point for growing grids, and time from 1e-3 to 1e-12 on the grid of a million points."""
    lines = []
    times = {}
    for count in (21, 41, 81, 161):
        axis = np.linspace(0.0, 1.0, count)
        grid = Grid(axis, axis, np.geomspace(1e-6, 10.0, count))
        times[count] = shortest(lambda grid=grid: field_on_grid(grid), 3)  # type: ignore[misc]
        each = times[count] / count**3
        lines.append(f"{count**3:>9,} points: {times[count] * 1e3:8.2f} ms, {each * 1e9:7.1f} ns a point")
    growth = np.log(times[161] / times[81]) / np.log(161**3 / 81**3)
    lines.append(f"time grows like the number of points to the power {growth:.2f} (linear is 1)")
    spent = {}
    for exponent in (3, 6, 9, 12):
        spent[exponent] = shortest(lambda e=exponent: field_on_grid(GRID, 10.0**-e), 3)  # type: ignore[misc]
        nodes = field_on_grid(GRID, 10.0**-exponent).node_count
        lines.append(f"tolerance 1e-{exponent}: {spent[exponent] * 1e3:.1f} ms, {nodes} nodes")
    lines.append(f"1e-12 costs {spent[12] / spent[3]:.2f} times what 1e-3 costs (wanted at most 2)")
    return lines
