"""Right requests with some of their parts replaced, removed or moved: every answer is right or a clear
refusal.
"""

from __future__ import annotations

import asyncio
import copy
import json
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from service.openapi import load_examples
from service.settings import Settings
from tests.api.client import check_problem_document, open_client

SETTINGS = Settings(
    store_path=Path(":memory:"),
    grid_points=500,
    time_limit_seconds=5,
    cost_multiplications=1e9,
    worker_threads=1,
)

# A study is a question of another call in an envelope, and outlives its request; tests/studies looks after these.
EXAMPLES = {name: example for name, example in load_examples().items() if example["path"] != "/v1/studies"}

STRANGE: st.SearchStrategy[Any] = st.sampled_from(
    [
        None, True, False, 0, -1, 1, 2, -0.0, 0.5, 1e-300, 1e59, 1e149, 1e-59, 10**30,
        "", " ", "0 m", "-1 mm", "1e-9 mm", "5 K", "1e55 km", "1e149 km", "semi-infinite", "end", "held",
        "patches", "infinite", "begin", "above", "mixed", "\u0000", "é" * 65,
        [], {}, [[]], [1, 2], [2, 1], ["end", 1], [0, "end"], [[1, 2], [3, 4]],
        {"from": 0, "to": 1, "count": 3}, {"condition": "insulated"}, {"map": "patches"},
        {"map": "samples", "csv": ",0,1\n0,1,2\n1,2,3\n", "beyond": "hold"},
        {"relative": 1e-3}, {"absolute": 1e-3}, {"in_plane": 3, "through": 2}, {"layer": 1, "count": 3}, [[1, 2]],
        [{"thickness": 1, "conductivity": 2}, {"thickness": 2, "conductivity": 1, "contact_conductance_below": 5}],
        {"condition": "mixed", "background": {"condition": "insulated"},
         "pads": [{"x": [1, 2], "y": [1, 2], "condition": "held", "flow": 1}]},
    ]
)  # fmt: skip


def places_of(value: Any, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    """Paths of all parts of a document but the whole."""
    entries = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    found = []
    for key, entry in entries:
        found += [(*path, key), *places_of(entry, (*path, key))]
    return found


@st.composite
def mutated_requests(draw: st.DrawFn) -> tuple[str, Any]:
    """The address and body of an example after one to three changes."""
    example = EXAMPLES[draw(st.sampled_from(sorted(EXAMPLES)))]
    body = copy.deepcopy(example["request"])
    for _ in range(draw(st.integers(1, 3))):
        paths = places_of(body)
        if not paths:
            break
        *parents, key = draw(st.sampled_from(paths))
        here = body
        for part in parents:
            here = here[part]
        action = draw(st.sampled_from(["replace", "remove", "scale", "copy"]))
        if action == "remove":
            del here[key]
        elif action == "scale" and isinstance(here[key], int | float):
            scaled = here[key] * draw(st.sampled_from([-1, 1e-9, 1e-3, 0.999999999, 1e3, 1e9, 1e40]))
            here[key] = max(-1e300, min(scaled, 1e300))
        elif action == "copy":
            other = example["request"]
            for part in draw(st.sampled_from(places_of(other))):
                other = other[part]
            here[key] = copy.deepcopy(other)
        else:
            here[key] = copy.deepcopy(draw(STRANGE))
    return example["path"], body


async def send(path: str, body: Any) -> None:
    """Send one request to a fresh service and check that the answer is one it may give."""
    async with open_client(SETTINGS) as client:
        answer = await client.post(
            path, content=json.dumps(body).encode(), headers={"Content-Type": "application/json"}
        )
    if answer.status_code in (200, 201):
        assert "problem_id" in json.loads(answer.text, parse_constant=pytest.fail)
    else:
        check_problem_document(answer, 422)


@given(mutated_requests())
@settings(max_examples=300, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))
def test_changed_request_is_answered_or_clearly_refused(request_: tuple[str, Any]) -> None:
    asyncio.run(send(*request_))
