"""Run the parts named, in the process that `python3 -m tests.benchmarks` starts."""

from __future__ import annotations

import argparse
from collections.abc import Callable

from tests.benchmarks import bar_grid, many_pads, over_http, scaling, small_problems, studies

PARTS: dict[str, Callable[[], list[str]]] = {
    "a": bar_grid.against_finite_differences,
    "b": bar_grid.against_one_product,
    "c": small_problems.in_sequence,
    "d": over_http.against_empty_route,
    "e": scaling.with_points_and_tolerance,
    "f": many_pads.against_one_load,
    "g": many_pads.with_one_moved,
    "h": studies.costs,
    "i": studies.killed_here,
    "j": studies.killed_on_a_cluster,
}


def main() -> None:
    """Print each part's lines as soon as they are known."""
    parser = argparse.ArgumentParser(prog="python3 -m tests.benchmarks", description="Print measured ratios.")
    parser.add_argument("parts", nargs="*", metavar="part", help="a to j; all of them by default")
    options = parser.parse_args()
    unknown = [letter for letter in options.parts if letter not in PARTS]
    if unknown:
        parser.error(f"there is no part {unknown[0]}; the parts are {', '.join(PARTS)}")
    for letter in options.parts or PARTS:
        for line in PARTS[letter]():
            print(f"({letter}) {line}", flush=True)


if __name__ == "__main__":
    main()
