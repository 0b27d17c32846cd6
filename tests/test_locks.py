"""The lock files: complete, pinned by digest, without addresses, and in step with pyproject.toml."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import NamedTuple

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

ROOT = Path(__file__).resolve().parent.parent
LOCKS = {
    "service": ROOT / "service" / "requirements.lock",
    "cluster": ROOT / "service" / "cluster.lock",
    "tests": ROOT / "tests" / "requirements.lock",
}
# Which optional packages of pyproject.toml a lock has beside those of the service.
EXTRAS = {"cluster": "cluster", "tests": "test"}
PYTHONS = ["3.11", "3.12", "3.13"]
ENTRY = re.compile(
    r"(?P<requirement>[a-z0-9-]+==\S+(?: ; [^\\\n]+)?) \\\n"
    r"(?:    --hash=sha256:[0-9a-f]{64} \\\n)*    --hash=sha256:[0-9a-f]{64}\n"
    r"(?:    # .*\n)*"
)


class Pin(NamedTuple):
    """One line of a lock: which version of a package, and where it counts."""

    name: str
    version: str
    marker: str


def pins(part: str) -> set[Pin]:
    found = set()
    for match in ENTRY.finditer(LOCKS[part].read_text(encoding="ascii")):
        requirement = Requirement(match["requirement"])
        version = next(iter(requirement.specifier)).version
        found.add(Pin(canonicalize_name(requirement.name), version, str(requirement.marker or "")))
    return found


def declared(part: str) -> list[Requirement]:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    texts = list(project["dependencies"])
    if part in EXTRAS:
        texts += project["optional-dependencies"][EXTRAS[part]]
    return [Requirement(text) for text in texts]


@pytest.mark.parametrize("part", LOCKS)
def test_lock_is_nothing_but_pins_with_digests(part: str) -> None:
    text = LOCKS[part].read_text(encoding="ascii")
    assert ENTRY.sub("", text) == "", "lines that are no pin with its digests"
    assert "://" not in text
    assert len(pins(part)) >= len(declared(part))


@pytest.mark.parametrize("python", PYTHONS)
@pytest.mark.parametrize("part", LOCKS)
def test_lock_has_a_version_in_the_range_of_each_declared_package(part: str, python: str) -> None:
    where = {"python_version": python, "python_full_version": f"{python}.0"}
    for requirement in declared(part):
        versions = [
            pin.version
            for pin in pins(part)
            if pin.name == canonicalize_name(requirement.name)
            and (not pin.marker or Requirement(f"x; {pin.marker}").marker.evaluate(where))  # type: ignore[union-attr]
        ]
        assert len(versions) == 1, f"{requirement.name} on Python {python}"
        assert versions[0] in requirement.specifier, f"{requirement} is locked to {versions[0]}"


@pytest.mark.parametrize("part", EXTRAS)
def test_every_lock_has_the_packages_the_service_runs_with(part: str) -> None:
    assert pins("service") - pins(part) == set()


def test_tests_run_with_the_packages_a_cluster_runs_with() -> None:
    assert pins("cluster") - pins("tests") == set()
