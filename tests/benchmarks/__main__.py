"""Print what the solver and the service cost beside things everyone knows: `python3 -m tests.benchmarks`.

Each line is a ratio measured in this run, so that the machine cancels: the core against finite differences with
algebraic multigrid, against one matrix product, against itself with more points and tighter tolerances; the
service against an empty route. Name parts (a b c d e) to run only these. One BLAS thread, as the service has it.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
from collections.abc import Callable

from service.first_run import prepare

# Threads that a matrix product may take; the service caps them so that requests do not thrash the machine.
THREADS = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}


def main() -> int:
    """Run the parts asked for in a process with one BLAS thread."""
    prepare("tests")
    parser = argparse.ArgumentParser(prog="python3 -m tests.benchmarks", description="Print measured ratios.")
    parser.add_argument("parts", nargs="*", help="letters a to e; all of them by default")
    options = parser.parse_args()
    if any(os.environ.get(name) != value for name, value in THREADS.items()):
        command = [sys.executable, "-m", "tests.benchmarks", *options.parts]
        return subprocess.call(command, env={**os.environ, **THREADS})

    # Numpy reads the number of threads when it is first imported, in the process started above.
    from tests.benchmarks import bar_grid, over_http, scaling, small_problems

    parts: dict[str, Callable[[], list[str]]] = {
        "a": bar_grid.against_finite_differences,
        "b": bar_grid.against_one_product,
        "c": small_problems.in_sequence,
        "d": over_http.against_empty_route,
        "e": scaling.with_points_and_tolerance,
    }
    for letter in options.parts or parts:
        for line in parts[letter]():
            print(f"({letter}) {line}", flush=True)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
