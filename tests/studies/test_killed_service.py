"""A service that is killed goes on with its studies where they were."""

from __future__ import annotations

import random
import sys
import time
from pathlib import Path

import httpx
import pytest

from tests.api.halden_reach import Json
from tests.studies.asking import cases_of, coefficients
from tests.studies.serving import Served, cases_stored, children_of, is_alive, serve

CASES = 600
KILLS = 2


def post(served: Served, study: Json) -> str:
    """The address of a study that was accepted."""
    answer = served.client.post("/v1/studies", json=study)
    assert answer.status_code == 202, answer.text
    return answer.headers["location"]


def wait_for_cases(served: Served, address: str, count: int) -> Json:
    """How a study stands once so many cases are done or it is over."""
    for _ in range(6000):
        shown: Json = served.client.get(address).json()
        assert shown["state"] in ("waiting", "running", "finished"), shown
        if shown["state"] == "finished" or shown["progress"]["cases_done"] >= count:
            return shown
        time.sleep(0.02)
    raise AssertionError(f"The study came to nothing: {shown}")


def wait_until_gone(processes: list[int]) -> None:
    end = time.monotonic() + 20
    while any(map(is_alive, processes)):
        assert time.monotonic() < end, "A worker outlives its service."
        time.sleep(0.1)


@pytest.mark.anyio
@pytest.mark.skipif(sys.platform == "win32", reason="kills as POSIX systems do")
async def test_killed_service_computes_each_case_once_and_ends_with_the_same_table(
    tmp_path: Path, client: httpx.AsyncClient
) -> None:
    study = cases_of([*coefficients(CASES - 1), -1.0])
    chance = random.Random(7)
    served = serve(tmp_path)
    address = post(served, study)
    stored_before = 0
    for kill in range(KILLS):
        wait_for_cases(served, address, CASES * (kill + 1) // (KILLS + 2))
        time.sleep(chance.uniform(0, 0.3))
        workers = children_of(served.process.pid)
        computed = served.cases_computed()
        # Nothing that would make whoever reads the log look for a fault.
        assert "Warning" not in served.kill()
        stored = cases_stored(tmp_path)
        # What was computed is what is there more than before: nothing is computed that was there, nothing is lost.
        assert computed <= stored - stored_before
        stored_before = stored
        assert workers
        # The workers do not go on without their service.
        wait_until_gone(workers)
        served = serve(tmp_path)
    shown = wait_for_cases(served, address, CASES + 1)
    assert (shown["progress"]["cases_done"], shown["progress"]["cases_failed"]) == (CASES, 1)
    assert served.cases_computed() == CASES - stored_before
    table = served.client.get(f"{address}/results").json()
    answer = served.client.get(f"{address}/answer").json()
    assert "Traceback" not in served.stop()

    # The same cases in one go in this process, to the last digit.
    uninterrupted = (await client.post("/v1/cases", json=study["question"])).json()
    assert answer == uninterrupted
    assert table["case"] == list(range(CASES))
    for part in ("numbers", "columns", "failures"):
        assert table[part] == uninterrupted[part]


@pytest.mark.skipif(sys.platform == "win32", reason="asks to end as POSIX systems do")
def test_service_that_is_asked_to_end_does_so_in_order_while_a_study_runs(tmp_path: Path) -> None:
    served = serve(tmp_path)
    address = post(served, cases_of(coefficients(CASES)))
    wait_for_cases(served, address, 1)
    workers = children_of(served.process.pid)
    computed = served.cases_computed()
    said = served.stop()
    assert "Application shutdown complete" in said
    assert "Traceback" not in said
    assert cases_stored(tmp_path) >= computed
    wait_until_gone(workers)
