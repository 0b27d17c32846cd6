"""Studies against a bare loop over the core, two workers against one, requests beside a study, and kills."""

from __future__ import annotations

import os
import random
import signal
import statistics
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from distributed import Client, LocalCluster

from service.core import solve
from service.core.conditions import Film
from service.models.problem import Problem
from service.openapi import load_examples
from service.settings import Settings
from service.translation.problem import read_problem
from tests.api.halden_reach import Json
from tests.benchmarks.over_http import QUESTION
from tests.studies.asking import cases_of, coefficients
from tests.studies.serving import Served, cases_stored, serve

# As many as make a study last: beginning one and its last chunks take their time whatever its length.
CASES = 2400
FULL_CASES = 20_000
KILLS = 5
REQUESTS = 150
BRICK = load_examples()["cases_crown_brick"]["request"]


def brick_study(count: int) -> Json:
    """The cold side and the heat loss of a crown brick for many thicknesses and film coefficients."""
    rows = [[250 + 100 * index / count, 10 + 10 * index / count] for index in range(count)]
    results = [
        {"name": "cold side", "result": "potential", "at": [115, 57, "high"]},
        {"name": "heat loss", "result": "flow", "z": 0},
    ]
    question = BRICK | {"results": results, "cases": {"table": "list", "rows": rows}, "limits": []}
    return {"study": "cases", "question": question}


def bare_loop(study: Json, count: int) -> tuple[list[tuple[float, float]], float]:
    """The first cases of a study by the core alone, and the seconds of each."""
    read = read_problem(Problem.model_validate(study["question"]["problem"]), Settings())
    body = read.body
    film = body.faces["z_high"]
    assert isinstance(film, Film)
    unit = film.coefficient / 14
    found = []
    begin = time.perf_counter()
    for thickness, coefficient in study["question"]["cases"]["rows"][:count]:
        changed = replace(film, coefficient=coefficient * unit)
        size = (body.size[0], body.size[1], thickness)
        solution = solve(replace(body, size=size, faces={**body.faces, "z_high": changed}))
        tolerance = 1e-9 * solution.span
        place = np.array([[115.0, 57.0, thickness]])
        cold = solution.field_at(place, tolerance=tolerance).potential[0]
        loss = solution.plane_total(2, 0.0, tolerance=tolerance).value
        assert loss is not None
        found.append((float(cold), loss))
    return found, (time.perf_counter() - begin) / count


def run_timed(served: Served, study: Json) -> tuple[Json, float]:
    """A study run to its end, and seconds a case once its workers have started."""
    answer = served.client.post("/v1/studies", json=study)
    answer.raise_for_status()
    address = answer.headers["location"]
    first: tuple[int, float] | None = None
    while True:
        shown: Json = served.client.get(address).json()
        done = shown["progress"]["cases_done"]
        if first is None and done:
            first = done, time.perf_counter()
        if shown["ended"]:
            assert shown["state"] == "finished", shown
            assert first is not None
            return shown, (time.perf_counter() - first[1]) / (done - first[0])
        time.sleep(0.01)


@contextmanager
def service(**settings: object) -> Iterator[Served]:
    """A service in a folder of its own."""
    with tempfile.TemporaryDirectory() as folder:
        served = serve(Path(folder), **settings)
        try:
            yield served
        finally:
            served.stop()


def against_bare_loop() -> list[str]:
    """Time a case of a study with one worker, and with two, against the core in a loop."""
    study = brick_study(CASES)
    bare_loop(study, 20)
    found, bare = bare_loop(study, 200)
    seconds = {}
    for workers in (1, 2):
        with service(study_workers=workers) as served:
            shown, seconds[workers] = run_timed(served, study)
            columns = served.client.get(shown["results"]).json()["columns"]
    agree = max(
        abs(column["values"][case] - value)
        for case, values in enumerate(found)
        for column, value in zip(columns, values, strict=True)
    )
    return [
        f"{CASES} cases of a brick: bare loop over the core {1e3 * bare:.2f} ms a case, study with one worker "
        f"{1e3 * seconds[1]:.2f} ms, with two {1e3 * seconds[2]:.2f} ms; results agree to {agree:.1e}",
        f"overhead {seconds[1] / bare:.2f} (wanted at most 1.3)",
        f"two workers against one {seconds[1] / seconds[2]:.2f} (wanted at least 1.7)",
    ]


def requests_beside_a_study() -> list[str]:
    """Times of requests that take some work, while a study runs and while none does."""

    def times(served: Served, begin: int) -> list[float]:
        spent = []
        for number in range(begin, begin + REQUESTS):
            question: Json = QUESTION | {"problem": QUESTION["problem"] | {"name": f"bar {number}"}}  # type: ignore[operator]
            begun = time.perf_counter()
            served.client.post("/v1/fields", json=question).raise_for_status()
            spent.append(time.perf_counter() - begun)
            time.sleep(0.02)
        return sorted(spent)

    with service(study_niceness=10) as served:
        times(served, 0)
        idle = times(served, REQUESTS)
        address = served.client.post("/v1/studies", json=brick_study(100_000)).headers["location"]
        while not served.client.get(address).json()["progress"]["cases_done"]:
            time.sleep(0.1)
        busy = times(served, 2 * REQUESTS)
        assert served.client.post(f"{address}/cancel").json()["state"] == "cancelled"
    p95 = [spent[int(0.95 * REQUESTS)] for spent in (idle, busy)]
    medians = [statistics.median(spent) for spent in (idle, busy)]
    return [
        f"{REQUESTS} new fields: median {1e3 * medians[0]:.1f} ms idle, {1e3 * medians[1]:.1f} ms beside a study",
        f"p95 {1e3 * p95[0]:.1f} ms idle, {1e3 * p95[1]:.1f} ms beside a study, ratio {p95[1] / p95[0]:.2f} "
        "(wanted at most 3)",
    ]


def costs() -> list[str]:
    """What a study costs, and what it costs others."""
    return [*against_bare_loop(), *requests_beside_a_study()]


def killed_here() -> list[str]:
    """A long study on this machine whose service is killed again and again, against one that is left alone."""
    return _killed({})


def killed_on_a_cluster() -> list[str]:
    """The same on a Dask cluster, of which a worker is killed as often as the service."""
    with LocalCluster(
        n_workers=2, threads_per_worker=1, host="127.0.0.1", dashboard_address=":0", silence_logs=True
    ) as cluster:
        return _killed({"cluster": cluster.scheduler_address})


def _killed(settings: dict[str, Any]) -> list[str]:
    study = cases_of(coefficients(FULL_CASES))
    chance = random.Random(11)
    begin = time.perf_counter()
    stored, twice = 0, 0
    with tempfile.TemporaryDirectory() as folder:
        served = serve(Path(folder), **settings)
        address = served.client.post("/v1/studies", json=study).headers["location"]
        for kill in range(KILLS):
            _wait(served, address, FULL_CASES * (kill + 1) // (KILLS + 2))
            time.sleep(chance.uniform(0, 1))
            if settings:
                _kill_a_worker(settings["cluster"])
            computed = served.cases_computed()
            served.kill()
            before, stored = stored, cases_stored(Path(folder))
            twice += max(0, computed - (stored - before))
            served = serve(Path(folder), **settings)
        _wait(served, address, FULL_CASES + 1)
        twice += served.cases_computed() - (FULL_CASES - stored)
        killed = served.client.get(f"{address}/results").content
        served.stop()
    spent = time.perf_counter() - begin
    begin = time.perf_counter()
    with service() as served:
        shown, _ = run_timed(served, study)
        alone = served.client.get(shown["results"]).content
    where = "on a cluster, of which as many workers were killed" if settings else "here"
    return [
        f"{FULL_CASES} cases {where}, service killed {KILLS} times: {spent:.0f} s; left alone here "
        f"{time.perf_counter() - begin:.0f} s",
        f"tables are {'the same' if killed == alone else 'NOT the same'} to the last digit; cases that were finished "
        f"and computed again: {twice}",
    ]


def _wait(served: Served, address: str, count: int) -> None:
    while True:
        shown = served.client.get(address).json()
        assert shown["state"] in ("waiting", "running", "finished"), shown
        if shown["state"] == "finished" or shown["progress"]["cases_done"] >= count:
            return
        time.sleep(0.05)


def _kill_a_worker(scheduler: str) -> None:
    with Client(scheduler, set_as_default=False) as client:
        processes = sorted(client.run(os.getpid).values())
    if processes:
        os.kill(processes[0], signal.SIGKILL)
