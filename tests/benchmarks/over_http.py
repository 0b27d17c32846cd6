"""The service over HTTP against a route that does nothing but return an array of the same size."""

from __future__ import annotations

import json
import multiprocessing
import socket
import statistics
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import httpx
import numpy as np
import uvicorn
from fastapi import FastAPI, Response

from service.app import create_app
from service.settings import Settings

REQUESTS = 200
COUNT = 41

QUESTION = {
    "problem": {
        "name": "bar cooled along its sides",
        "potential": "temperature",
        "units": {"length": "mm", "potential": "degC"},
        "body": {"size": {"x": 40, "y": 60, "z": 200}, "conductivity": 95},
        "faces": {
            "x_low": {"condition": "held", "value": 30},
            "x_high": {"condition": "film", "coefficient": "850 W/(m^2 K)", "ambient": 24},
            "y_low": {"condition": "insulated"},
            "y_high": {"condition": "film", "coefficient": "200 W/(m^2 K)", "ambient": 24},
            "z_low": {"condition": "held", "value": 640},
            "z_high": {"condition": "insulated"},
        },
    },
    "evaluate": {
        "grids": [
            {
                "name": "plane",
                "x": {"from": 0, "to": 40, "count": COUNT},
                "y": {"from": 0, "to": 60, "count": COUNT},
                "z": 20,
            }
        ],
        "quantities": ["potential"],
    },
}


def empty_app() -> FastAPI:
    """Two routes that compute nothing: one returns the array as any route would, one returns ready bytes."""
    app = FastAPI()
    values = np.random.default_rng(4).uniform(20, 640, size=(COUNT, COUNT)).tolist()
    ready = json.dumps(values).encode()

    @app.post("/empty")
    async def empty() -> list[list[float]]:
        return values

    @app.post("/ready")
    async def bytes_at_hand() -> Response:
        return Response(ready, media_type="application/json")

    return app


def _serve(which: str, port: int, store: str) -> None:
    app = empty_app() if which == "empty" else create_app(Settings(store_path=Path(store) / "problems.sqlite3"))
    uvicorn.run(app, host="127.0.0.1", port=port, log_level="error")


@contextmanager
def server(which: str) -> Iterator[httpx.Client]:
    """A client of a real server in a process of its own, on a free port of this machine."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    with tempfile.TemporaryDirectory() as store:
        process = multiprocessing.get_context("spawn").Process(target=_serve, args=(which, port, store), daemon=True)
        process.start()
        try:
            with httpx.Client(base_url=f"http://127.0.0.1:{port}", timeout=30, trust_env=False) as client:
                _wait_for(client)
                yield client
        finally:
            process.terminate()
            process.join()


def _wait_for(client: httpx.Client) -> None:
    for _ in range(300):
        try:
            client.get("/")
        except httpx.ConnectError:
            time.sleep(0.1)
        else:
            return
    raise RuntimeError("the server did not start")


def median_time(send: Callable[[], httpx.Response]) -> float:
    """Seconds of a request in the middle of many."""
    spent = []
    for _ in range(REQUESTS):
        begin = time.perf_counter()
        response = send()
        spent.append(time.perf_counter() - begin)
        response.raise_for_status()
    return statistics.median(spent)


def against_empty_route() -> list[str]:
    """Median time of the same question asked again against the empty routes."""
    with server("service") as ours, server("empty") as other:
        begin = time.perf_counter()
        answer = ours.post("/v1/fields", json=QUESTION)
        first = time.perf_counter() - begin
        answer.raise_for_status()
        # The same bytes for all, so that nobody pays for the client's encoding of the question.
        body = json.dumps(QUESTION).encode()
        headers = {"Content-Type": "application/json"}
        times = {
            path: median_time(lambda c=client, p=path: c.post(p, content=body, headers=headers))  # type: ignore[misc]
            for client, path in ((other, "/empty"), (ours, "/v1/fields"), (other, "/ready"))
        }
    again, empty, ready = times["/v1/fields"], times["/empty"], times["/ready"]
    return [
        f"41 x 41 plane: first {first * 1e3:.1f} ms, again {again * 1e3:.2f} ms, {len(answer.content)} bytes",
        f"a route that returns the array {empty * 1e3:.2f} ms, one with ready bytes {ready * 1e3:.2f} ms",
        f"ratio to the route that returns the array {again / empty:.2f} (wanted at most 3)",
    ]
