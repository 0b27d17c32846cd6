"""Studies on a Dask cluster: the same results to the last digit, whatever happens to its processes."""

from __future__ import annotations

import asyncio
import os
import signal
import socket
import sys
from collections.abc import AsyncIterator, Iterator
from contextlib import asynccontextmanager, contextmanager
from typing import Any

import httpx
import pytest
from distributed import Client, LocalCluster

from service.settings import Settings
from tests.api.client import open_client
from tests.api.halden_reach import Json
from tests.studies.asking import cases_of, coefficients, quick

pytestmark = [
    pytest.mark.anyio,
    pytest.mark.skipif(sys.platform == "win32", reason="kills as POSIX systems do"),
]

STUDY = cases_of([*coefficients(399), -1.0])


@contextmanager
def cluster(port: int = 0, workers: int = 2) -> Iterator[Any]:
    """A scheduler and worker processes on this machine."""
    with LocalCluster(
        n_workers=workers,
        threads_per_worker=1,
        processes=True,
        host="127.0.0.1",
        scheduler_port=port,
        dashboard_address=":0",
        silence_logs=True,
    ) as running:
        yield running


@asynccontextmanager
async def studies_on(address: str, settings: Settings) -> AsyncIterator[httpx.AsyncClient]:
    async with open_client(quick(settings).model_copy(update={"cluster": address})) as client:
        yield client


async def wait_for_cases(client: httpx.AsyncClient, address: str, count: int) -> Json:
    for _ in range(6000):
        shown: Json = (await client.get(address)).json()
        assert shown["state"] in ("waiting", "running", "finished"), shown
        if shown["state"] == "finished" or shown["progress"]["cases_done"] >= count:
            return shown
        await asyncio.sleep(0.02)
    raise AssertionError(f"The study came to nothing: {shown}")


async def test_lost_worker_loses_nothing_and_results_are_those_of_this_machine(settings: Settings) -> None:
    with cluster() as running:
        async with studies_on(running.scheduler_address, settings) as client:
            address = (await client.post("/v1/studies", json=STUDY)).headers["location"]
            await wait_for_cases(client, address, 50)
            with Client(running.scheduler_address, set_as_default=False) as other:
                workers = other.run(os.getpid)
            os.kill(next(iter(workers.values())), signal.SIGKILL)
            shown = await wait_for_cases(client, address, 401)
            progress = shown["progress"]
            assert (shown["state"], progress["cases_done"], progress["cases_failed"]) == ("finished", 400, 1)
            answer = (await client.get(f"{address}/answer")).json()
            # The same cases in this process, to the last digit.
            assert answer == (await client.post("/v1/cases", json=STUDY["question"])).json()
            # No finished chunk was computed again.
            assert (await client.get("/v1/diagnostics")).json()["studies"]["cases"] == 400


async def test_study_waits_for_a_lost_scheduler_and_goes_on(settings: Settings) -> None:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    async with studies_on(f"tcp://127.0.0.1:{port}", settings) as client:
        address = (await client.post("/v1/studies", json=STUDY)).headers["location"]
        for _ in range(600):
            shown = (await client.get(address)).json()
            if shown["waits_for_cluster"]:
                break
            await asyncio.sleep(0.05)
        # No scheduler has been started yet.
        assert (shown["state"], shown["waits_for_cluster"]) == ("running", True)
        with cluster(port, workers=1):
            before = await wait_for_cases(client, address, 50)
            assert before["state"] == "running"
        assert (await client.get(address)).json()["state"] == "running"
        with cluster(port, workers=1):
            shown = await wait_for_cases(client, address, 401)
        assert (shown["state"], shown["progress"]["cases_done"]) == ("finished", 400)
        assert (await client.get("/v1/diagnostics")).json()["studies"]["cases"] == 400
