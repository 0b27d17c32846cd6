"""Check everything before a change goes in: `python3 -m tests.check`.

Runs the linter, the formatter, the types and the whole suite, all of them even if one fails, and ends with
an exit code other than zero if any did. `--without-tests` leaves out the suite, `--fix` lets the linter and
the formatter change what they can.
"""

from __future__ import annotations

import argparse
import subprocess
import sys

from service.first_run import CHECKOUT, prepare


def steps(*, fix: bool, with_tests: bool) -> dict[str, list[str]]:
    """Each step's name and the arguments of the Python that runs it, in order, quickest first."""
    chosen = {
        "lint": ["ruff", "check", *(["--fix"] if fix else [])],
        "format": ["ruff", "format", *([] if fix else ["--check"])],
        "types": ["mypy"],
    }
    if with_tests:
        chosen["tests"] = ["tests"]
    return {name: ["-m", *arguments] for name, arguments in chosen.items()}


def main() -> int:
    """Run the steps and return 0 if all passed, 1 otherwise."""
    prepare("tests")
    parser = argparse.ArgumentParser(prog="python3 -m tests.check", description="Check everything.")
    parser.add_argument("--fix", action="store_true", help="let the linter and the formatter change files")
    parser.add_argument("--without-tests", action="store_true", help="leave out the suite")
    options = parser.parse_args()

    failed = []
    for name, arguments in steps(fix=options.fix, with_tests=not options.without_tests).items():
        print(f"== {name}", flush=True)
        if subprocess.call([sys.executable, *arguments], cwd=CHECKOUT):
            failed.append(name)
    print(f"Failed: {', '.join(failed)}" if failed else "All checks passed")
    return 1 if failed else 0


if __name__ == "__main__":
    raise SystemExit(main())
