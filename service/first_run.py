"""The first run in a fresh checkout: make .venv, install what is locked, run again inside it.

`python3 -m service` and `python3 -m tests` call `prepare` before they import anything that has to be
installed. This module therefore uses the standard library alone, and is written so that an older Python
can read it as far as the sentence that turns it away.

    outside a virtual environment, in a checkout   .venv is made or brought up to date, and the command
                                                   runs again inside it
    inside the checkout's own .venv                brought up to date if its lock file has changed
    inside any other                               nothing, or one sentence if the packages are missing
    in an image, or installed                      nothing
"""

from __future__ import annotations

import contextlib
import hashlib
import importlib.util
import os
import platform
import shutil
import signal
import subprocess
import sys
import venv
from collections.abc import Iterator
from pathlib import Path
from typing import NoReturn

if sys.platform == "win32":
    import msvcrt
else:
    import fcntl

OLDEST_PYTHON = (3, 11)
CHECKOUT = Path(__file__).resolve().parent.parent

# One package of each part that stands for all: where it is missing, so are others.
MAIN_PACKAGE = {"service": "uvicorn", "tests": "pytest"}

# Stands in .venv while packages are being installed: an environment that still has it was left half made.
HALF_MADE = "stillfield-half-made"


def prepare(part: str, checkout: Path = CHECKOUT) -> None:
    """Return once the packages of this part are there, or run this very command again where they are.

    part: "service" or "tests", the folder whose requirements.lock is meant.
    Ends the process with one sentence where that cannot be done.
    """
    _refuse_if_too_old(sys.version_info[:2])
    lock = checkout / part / "requirements.lock"
    if not (lock.is_file() and (checkout / "pyproject.toml").is_file()):
        return
    environment = checkout / ".venv"
    if sys.prefix == sys.base_prefix:
        _bring_up_to_date(environment, lock, may_make_anew=True)
        _run_again(_interpreter(environment))
    if Path(sys.prefix).resolve() == environment.resolve():
        _bring_up_to_date(environment, lock, may_make_anew=False)
    elif importlib.util.find_spec(MAIN_PACKAGE[part]) is None:
        _give_up(
            f"The virtual environment {sys.prefix} lacks {MAIN_PACKAGE[part]}. Install what is needed with: "
            f"python -m pip install --require-hashes --requirement {lock}"
        )


def _refuse_if_too_old(version: tuple[int, int]) -> None:
    if version < OLDEST_PYTHON:
        _give_up(
            f"Stillfield needs Python {_dotted(OLDEST_PYTHON)} or newer; this is {_dotted(version)}, {sys.executable}."
        )


def _dotted(version: tuple[int, int]) -> str:
    return ".".join(str(number) for number in version)


def _say(sentence: str) -> None:
    print(sentence, file=sys.stderr, flush=True)


def _give_up(sentence: str) -> NoReturn:
    _say(sentence)
    raise SystemExit(1)


def _interpreter(environment: Path) -> Path:
    """The Python of a virtual environment."""
    return environment / ("Scripts/python.exe" if os.name == "nt" else "bin/python")


def _stamp(environment: Path, lock: Path) -> Path:
    return environment / f"stillfield-{lock.parent.name}.stamp"


def _stamp_text(lock: Path) -> str:
    """What the packages in an environment depend on: the lock file, the Python and the processor."""
    digest = hashlib.sha256(lock.read_bytes()).hexdigest()
    return f"{digest} {_dotted(sys.version_info[:2])} {platform.machine()}\n"


def _is_current(environment: Path, lock: Path) -> bool:
    stamp = _stamp(environment, lock)
    return (
        not (environment / HALF_MADE).exists()
        and _interpreter(environment).exists()
        and stamp.is_file()
        and stamp.read_text(encoding="ascii") == _stamp_text(lock)
    )


def _bring_up_to_date(environment: Path, lock: Path, *, may_make_anew: bool) -> None:
    """Install what the lock file lists, unless the stamp says that this has been done."""
    if _is_current(environment, lock):
        return
    with _one_at_a_time(environment.with_name(".venv.lock")):
        # While this one waited, another first run may have done it.
        if _is_current(environment, lock):
            return
        if may_make_anew and ((environment / HALF_MADE).exists() or not _works(environment)):
            _make(environment)
        _install(environment, lock)


def _works(environment: Path) -> bool:
    """Whether the environment has pip and the version of Python that is running."""
    question = "import pip, sys; print(sys.version_info[0], sys.version_info[1], sep='.')"
    command = [str(_interpreter(environment)), "-c", question]
    try:
        answer = subprocess.run(command, capture_output=True, text=True, check=False)
    except OSError:
        return False
    return answer.stdout.strip() == _dotted(sys.version_info[:2])


def _make(environment: Path) -> None:
    """Make the environment, with pip, in place of what is there."""
    if importlib.util.find_spec("ensurepip") is None:
        _give_up(
            "This Python comes without the part that makes virtual environments. "
            "On Debian and Ubuntu install it with: apt install python3-venv"
        )
    _say(f"Making the virtual environment {environment}")
    try:
        # Cleared here and not by venv, so that the sign of being half made is there from the beginning.
        if environment.exists():
            shutil.rmtree(environment)
        environment.mkdir()
        (environment / HALF_MADE).touch()
        venv.EnvBuilder(symlinks=os.name != "nt").create(environment)
    except OSError as error:
        _give_up(f"The virtual environment {environment} cannot be made: {error}.")
    # Apart from `create`, which would hide what this step has to say if it fails.
    command = [str(_interpreter(environment)), "-Im", "ensurepip", "--default-pip"]
    if subprocess.call(command, stdout=subprocess.DEVNULL):
        _give_up(
            "pip could not be put into the virtual environment; what went wrong stands above. "
            "On Debian and Ubuntu this needs the package python3-venv."
        )


def _install(environment: Path, lock: Path) -> None:
    """Install exactly what the lock file lists, and set the stamp."""
    _say(f"Installing what {lock.parent.name}/{lock.name} lists; the first time takes a minute or so")
    half_made = environment / HALF_MADE
    half_made.touch()
    command = [str(_interpreter(environment)), "-m", "pip", "install", "--quiet", "--no-input"]
    command += ["--disable-pip-version-check", "--require-hashes", "--only-binary", ":all:"]
    command += ["--requirement", str(lock)]
    if subprocess.call(command):
        _give_up("The packages could not be installed; pip says why above. The next start tries again.")
    _stamp(environment, lock).write_text(_stamp_text(lock), encoding="ascii")
    half_made.unlink()


@contextlib.contextmanager
def _one_at_a_time(path: Path) -> Iterator[None]:
    """Wait for another first run in this checkout; one that was killed holds nobody up."""
    try:
        file = path.open("ab")
    except OSError as error:
        _give_up(f"The virtual environment cannot be made in this folder: {error}.")
    with file:
        _lock(file.fileno())
        yield


def _lock(file: int) -> None:
    """Lock an open file until it is closed or its process ends."""
    if sys.platform == "win32":
        while True:
            with contextlib.suppress(OSError):  # raised after ten seconds of waiting
                msvcrt.locking(file, msvcrt.LK_LOCK, 1)
                return
    else:
        fcntl.flock(file, fcntl.LOCK_EX)


def _run_again(interpreter: Path) -> NoReturn:
    """Run this command, with the same options and arguments, under another Python."""
    command = [str(interpreter), *sys.orig_argv[1:]]
    if os.name != "nt":
        os.execv(interpreter, command)
    # On Windows `execv` gives the console back at once, so here we wait. Ctrl-C is for the command itself.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    raise SystemExit(subprocess.call(command))
