"""Print what the solver and the service cost beside things everyone knows: `python3 -m tests.benchmarks`.

Each line is a ratio measured in this run, so that the machine cancels: the core against finite differences
with algebraic multigrid, against one matrix product, against itself with more points and tighter
tolerances, all pads of a stack against one load by finite differences, one pad that moves against all of them; the
service against an empty route; a study (h) against a bare loop over the core, two workers against one, and requests
beside it against those without; a study of 20,000 cases whose service is killed five times (i), and the same on a Dask
cluster that loses workers (j), against one left alone. Name parts (a to j) to run only these. One BLAS thread, as the
service has it.
"""

from __future__ import annotations

import os
import subprocess
import sys

from service.first_run import prepare

# Threads that a matrix product may take; the service caps them so that requests do not thrash the machine.
THREADS = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}


def main() -> int:
    """Run the parts asked for in a process that had one BLAS thread from its start."""
    prepare("tests")
    command = [sys.executable, "-m", "tests.benchmarks.run", *sys.argv[1:]]
    return subprocess.call(command, env={**os.environ, **THREADS})


if __name__ == "__main__":
    raise SystemExit(main())
