"""What README.md and DEVELOPERS.md tell a reader holds."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

import httpx
import pytest

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
REQUEST, ANSWER, DECISION = (json.loads(block) for block in re.findall(r"```json\n(.*?)```", README, flags=re.DOTALL))

pytestmark = pytest.mark.anyio


def check_printed(found: Any, printed: Any, where: str) -> None:
    """Fail unless the answer has all that is printed, its numbers to the digits printed."""
    if isinstance(printed, dict):
        for key, value in printed.items():
            if key in ("agreement", "checked_places"):
                # Evidence of one run: rounding differs between machines.
                assert type(found[key]) is type(value)
            else:
                check_printed(found[key], value, f"{where}/{key}")
    elif isinstance(printed, list):
        assert len(found) == len(printed), where
        for index, (one, other) in enumerate(zip(found, printed, strict=True)):
            check_printed(one, other, f"{where}/{index}")
    elif isinstance(printed, float):
        # Bounds are printed with two digits, values with seven or more.
        assert found == pytest.approx(printed, rel=0.05 if "bound" in where else 1e-6), where
    else:
        assert found == printed, where


async def test_request_in_the_readme_has_the_answer_in_the_readme(client: httpx.AsyncClient) -> None:
    response = await client.post("/v1/fields", json=REQUEST)
    assert response.status_code == 200
    check_printed(response.json(), ANSWER, "")


async def test_size_in_the_readme_is_the_one_that_is_answered(client: httpx.AsyncClient) -> None:
    response = await client.post("/v1/sizing", json=DECISION | {"problem": REQUEST["problem"]})
    assert response.status_code == 200
    hottest = response.json()["results"][0]
    edge = response.json()["sizing"]["intervals"][0]["low"]
    said = re.search(
        r"it is ([\d.]+) degC, at \(([^)]+)\); the limit holds from ([\d.]+) W/\(m\^2 K\) up,\s*"
        r"known to ([\d.e-]+)\.\s",
        README,
    )
    assert said is not None
    assert hottest["value"] == pytest.approx(float(said[1]), abs=5e-5)
    assert hottest["at"] == pytest.approx([float(length) for length in said[2].split(",")], abs=0.1)
    assert edge["value"] == pytest.approx(float(said[3]), abs=5e-4)
    assert edge["error_bound"] == pytest.approx(float(said[4]), rel=0.5)


async def test_calls_named_in_the_readme_exist(client: httpx.AsyncClient) -> None:
    paths = {re.sub(r"\{\w+\}", "{id}", path) for path in (await client.get("/openapi.json")).json()["paths"]}
    named = {path.split("#")[0] for path in re.findall(r"`(?:GET|POST|DELETE) (/[^`]+)`", README)}
    assert {path for path in named if path.startswith("/v1/")} <= paths


def test_files_named_in_the_map_exist() -> None:
    tree = re.search(r"## Map\n\n```\n(.*?)```", DEVELOPERS, flags=re.DOTALL)
    assert tree is not None
    named = 0
    for line in tree.group(1).splitlines():
        names = re.split(r"  ", line)[0].split(", ")
        folder = Path(names[0]).parent
        for name in names:
            path = ROOT / name if "/" in name else ROOT / folder / name
            assert path.exists(), path
            named += 1
    assert named > 25


def test_links_lead_somewhere() -> None:
    for target in re.findall(r"\]\(([^)#]+)\)", README + DEVELOPERS):
        assert (ROOT / target).exists(), target
