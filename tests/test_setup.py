"""The first run in a fresh checkout, tried on a small checkout of its own, without a network.

The checkout has the real first-run step and a main module that needs one package, `greeting`, which lies
beside it as a wheel.
"""

from __future__ import annotations

import ast
import hashlib
import os
import subprocess
import sys
import venv
import zipfile
from dataclasses import dataclass
from pathlib import Path

import pytest

from service import first_run

ROOT = Path(__file__).resolve().parent.parent

# The Python that the environment of these tests was made from.
OUTER_PYTHON: str = getattr(sys, "_base_executable", sys.executable)

MAIN_MODULE = """
import sys
from service.first_run import prepare
prepare("service")
import greeting
print(greeting.TEXT, sys.prefix, *sys.argv[1:], sep="|")
"""

# Read by Pythons that are to be turned away, so their newest syntax is that of 3.7.
READ_BY_OLD_PYTHONS = [
    "service/__init__.py",
    "service/__main__.py",
    "service/first_run.py",
    "tests/__init__.py",
    "tests/__main__.py",
    "tests/check.py",
]


@dataclass(frozen=True)
class Checkout:
    """A folder with what the first-run step looks for, and with wheels of `greeting` beside it."""

    folder: Path
    wheels: Path

    @property
    def environment(self) -> Path:
        return self.folder / ".venv"

    def lock(self, version: str, digest: str | None = None) -> None:
        """Pin `greeting` to a version, by its true digest or by a given one."""
        wheel = self.wheels / f"greeting-{version}-py3-none-any.whl"
        digest = digest or hashlib.sha256(wheel.read_bytes()).hexdigest()
        text = f"greeting=={version} \\\n    --hash=sha256:{digest}\n"
        (self.folder / "service" / "requirements.lock").write_text(text, encoding="ascii")

    def start(self, *arguments: str, python: str | None = None) -> subprocess.Popen[str]:
        """Begin `python -m service` in the checkout, by a Python outside any virtual environment."""
        inherited = {
            name: value
            for name, value in os.environ.items()
            if not name.startswith(("PIP_", "PYTHON")) and name != "VIRTUAL_ENV"
        }
        offline = {"PIP_NO_INDEX": "1", "PIP_FIND_LINKS": str(self.wheels), "PIP_CONFIG_FILE": os.devnull}
        return subprocess.Popen(
            [python or OUTER_PYTHON, "-m", "service", *arguments],
            cwd=self.folder,
            env=inherited | offline,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )

    def run(self, *arguments: str, python: str | None = None) -> tuple[int, str, str]:
        """Run it to its end: exit code, what it printed, what it said on the way."""
        process = self.start(*arguments, python=python)
        printed, said = process.communicate(timeout=120)
        return process.returncode, printed.strip(), said


def write_wheel(folder: Path, version: str) -> None:
    information = f"greeting-{version}.dist-info"
    files = {
        "greeting.py": f"TEXT = 'greeting {version}'\n",
        f"{information}/METADATA": f"Metadata-Version: 2.1\nName: greeting\nVersion: {version}\n",
        f"{information}/WHEEL": "Wheel-Version: 1.0\nRoot-Is-Purelib: true\nTag: py3-none-any\n",
    }
    record = "".join(f"{name},,\n" for name in [*files, f"{information}/RECORD"])
    with zipfile.ZipFile(folder / f"greeting-{version}-py3-none-any.whl", "w") as wheel:
        for name, text in (files | {f"{information}/RECORD": record}).items():
            wheel.writestr(name, text)


@pytest.fixture
def checkout(tmp_path: Path) -> Checkout:
    made = Checkout(folder=tmp_path / "checkout", wheels=tmp_path / "wheels")
    made.wheels.mkdir()
    for version in ("1.0", "2.0"):
        write_wheel(made.wheels, version)
    service = made.folder / "service"
    service.mkdir(parents=True)
    for name in ("__init__.py", "first_run.py"):
        (service / name).write_bytes((ROOT / "service" / name).read_bytes())
    (service / "__main__.py").write_text(MAIN_MODULE, encoding="ascii")
    (made.folder / "pyproject.toml").touch()
    made.lock("1.0")
    return made


def test_first_start_installs_what_is_locked_and_the_next_changes_nothing(checkout: Checkout) -> None:
    expected = (0, f"greeting 1.0|{checkout.environment}|one|two words")
    code, printed, said = checkout.run("one", "two words")
    assert (code, printed) == expected, said
    assert "Installing" in said

    stamp = checkout.environment / "stillfield-service.stamp"
    written = stamp.stat().st_mtime_ns
    code, printed, said = checkout.run("one", "two words")
    assert (code, printed, said) == (*expected, "")
    assert stamp.stat().st_mtime_ns == written


def test_changed_lock_is_installed_into_the_same_environment(checkout: Checkout) -> None:
    assert checkout.run()[0] == 0
    (checkout.environment / "kept").touch()
    checkout.lock("2.0")
    code, printed, said = checkout.run()
    assert (code, printed) == (0, f"greeting 2.0|{checkout.environment}"), said
    assert (checkout.environment / "kept").exists()

    # From inside, as someone does who has activated it.
    checkout.lock("1.0")
    inside = str(first_run._interpreter(checkout.environment))
    assert checkout.run(python=inside)[:2] == (0, f"greeting 1.0|{checkout.environment}")


@pytest.mark.parametrize("left_behind", ["installing", "nothing but a folder"])
def test_half_made_environment_is_made_anew(checkout: Checkout, left_behind: str) -> None:
    if left_behind == "installing":
        # With pip, so that nothing but the mark shows it.
        venv.create(checkout.environment, with_pip=True)
        (checkout.environment / first_run.HALF_MADE).touch()
    else:
        checkout.environment.mkdir()
    (checkout.environment / "rubble").touch()
    code, printed, said = checkout.run()
    assert (code, printed) == (0, f"greeting 1.0|{checkout.environment}"), said
    assert not (checkout.environment / "rubble").exists()
    assert not (checkout.environment / first_run.HALF_MADE).exists()


def test_package_other_than_the_locked_one_is_refused_and_then_tried_again(
    checkout: Checkout,
) -> None:
    checkout.lock("1.0", digest="0" * 64)
    code, printed, said = checkout.run()
    assert (code, printed) == (1, "")
    assert said.endswith("The packages could not be installed; pip says why above. The next start tries again.\n")
    assert "Traceback" not in said

    checkout.lock("1.0")
    code, printed, said = checkout.run()
    assert (code, printed) == (0, f"greeting 1.0|{checkout.environment}"), said


def test_two_first_starts_at_once_do_not_disturb_each_other(checkout: Checkout) -> None:
    processes = [checkout.start() for _ in range(2)]
    outcomes = [process.communicate(timeout=120) for process in processes]
    assert [process.returncode for process in processes] == [0, 0], outcomes
    assert [printed.strip() for printed, _ in outcomes] == [f"greeting 1.0|{checkout.environment}"] * 2
    assert sorted("Installing" in said for _, said in outcomes) == [False, True]


def test_other_virtual_environment_without_the_packages_gets_the_command_that_installs_them(
    checkout: Checkout,
) -> None:
    other = checkout.folder.parent / "other"
    venv.create(other)
    code, printed, said = checkout.run(python=str(first_run._interpreter(other)))
    assert (code, printed) == (1, "")
    assert said.startswith(f"The virtual environment {other} lacks uvicorn.")
    assert f"--requirement {checkout.folder / 'service' / 'requirements.lock'}" in said
    assert not checkout.environment.exists()


def test_nothing_is_made_outside_a_checkout(checkout: Checkout) -> None:
    (checkout.folder / "pyproject.toml").unlink()
    code, printed, said = checkout.run()
    assert (code, printed) == (1, "")
    assert "No module named 'greeting'" in said
    assert not checkout.environment.exists()
    assert "Making" not in said


def test_old_python_is_turned_away_with_one_sentence(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as end:
        first_run._refuse_if_too_old((3, 10))
    assert end.value.code == 1
    said = capsys.readouterr().err
    assert said == f"Stillfield needs Python 3.11 or newer; this is 3.10, {sys.executable}.\n"
    first_run._refuse_if_too_old((3, 11))


@pytest.mark.parametrize("name", READ_BY_OLD_PYTHONS)
def test_old_python_can_read_as_far_as_that_sentence(name: str) -> None:
    ast.parse((ROOT / name).read_text(encoding="utf-8"), feature_version=(3, 7))


def test_python_without_ensurepip_is_told_what_to_install(
    checkout: Checkout, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("importlib.util.find_spec", lambda name: None)
    with pytest.raises(SystemExit) as end:
        first_run._make(checkout.environment)
    assert end.value.code == 1
    assert capsys.readouterr().err.endswith("On Debian and Ubuntu install it with: apt install python3-venv\n")
    assert not checkout.environment.exists()


@pytest.mark.parametrize("name", ["OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"])
@pytest.mark.parametrize(("given", "used"), [(None, "1"), ("4", "4")])
def test_linear_algebra_has_one_thread_unless_told_otherwise(name: str, given: str | None, used: str) -> None:
    environment = {key: value for key, value in os.environ.items() if key != name}
    if given is not None:
        environment[name] = given
    program = f"import service, os, sys; print(os.environ['{name}'], 'numpy' in sys.modules)"
    printed = subprocess.check_output([sys.executable, "-c", program], cwd=ROOT, env=environment, text=True)
    assert printed.split() == [used, "False"]
