"""Run the whole suite in parallel: `python3 -m tests`. Further arguments go to pytest.

`-n 0` keeps it to one process, `-k words` or a path to part of the suite.
"""

from __future__ import annotations

import os
import sys

from service.first_run import prepare


def usable_processors() -> int:
    """How many processors this process may use, which in a container may be fewer than there are."""
    if sys.platform == "linux":
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def main() -> int:
    """Install what is missing in a fresh checkout, then run pytest and return its exit code."""
    prepare("tests")

    # Only now is it certain to be installed.
    import pytest

    return int(pytest.main(["--numprocesses", str(usable_processors()), *sys.argv[1:]]))


if __name__ == "__main__":
    raise SystemExit(main())
