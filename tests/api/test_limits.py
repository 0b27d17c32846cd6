"""What is bounded before work starts, and what is stopped while it runs."""

from __future__ import annotations

import asyncio
import json
import threading
from collections.abc import AsyncIterator, Iterator
from contextlib import contextmanager

import httpx
import pytest

from service.app import create_app
from service.core.errors import Interrupted
from service.middleware import BodyLimit
from service.models.evaluate import Question
from service.settings import Settings
from service.translation.solving import Solved, Solver
from service.worker import KeepGoing, Worker
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, ask_points, sight_port_bar, slab

pytestmark = pytest.mark.anyio

GRID = {"x": {"from": 0, "to": 40, "count": 50}, "y": {"from": 0, "to": 60, "count": 50}, "z": [0, 5, 10, 15]}


def ask_grid(**more: object) -> Json:
    """A question of ten thousand places."""
    return {"problem": sight_port_bar(), "evaluate": {"grids": [GRID], **more}}


@contextmanager
def held_up(monkeypatch: pytest.MonkeyPatch) -> Iterator[threading.Event]:
    """While the event is not set, every computation waits in its thread."""
    go = threading.Event()
    solve = Solver.of_question

    def wait_and_solve(self: Solver, question: Question, keep_going: KeepGoing | None = None) -> Solved:
        assert go.wait(20)
        return solve(self, question, keep_going)

    monkeypatch.setattr(Solver, "of_question", wait_and_solve)
    try:
        yield go
    finally:
        go.set()


@pytest.mark.parametrize("declared", [True, False], ids=["with its length", "in chunks"])
async def test_long_body_is_turned_away(settings: Settings, declared: bool) -> None:
    async with open_client(settings.model_copy(update={"body_bytes": 10_000})) as client:
        content = b'{"problem": "' + b"x" * 20_000 + b'"}'

        async def chunks() -> AsyncIterator[bytes]:
            for start in range(0, len(content), 1_000):
                yield content[start : start + 1_000]

        answer = await client.post(
            "/v1/problems",
            content=content if declared else chunks(),
            headers={"Content-Type": "application/json"},
        )
        document = check_problem_document(answer, 413)
        assert "longer than 10000 bytes" in document["detail"]


async def test_body_of_declared_length_is_refused_before_it_is_read() -> None:
    """A client that announces too much is answered without waiting for what it announced."""
    sent = []

    async def app(*_: object) -> None:
        raise AssertionError("the app was called")

    async def receive() -> dict[str, object]:
        raise AssertionError("the body was read")

    async def send(message: dict[str, object]) -> None:
        sent.append(message)

    scope = {"type": "http", "method": "POST", "path": "/", "headers": [(b"content-length", b"11")]}
    await BodyLimit(app, 10)(scope, receive, send)  # type: ignore[arg-type]
    assert sent[0]["status"] == 413


@pytest.mark.parametrize("length", ["-1", "many", "9" * 30])
async def test_length_that_is_none_is_refused(client: httpx.AsyncClient, length: str) -> None:
    answer = await client.post(
        "/v1/problems", content=b"{}", headers={"Content-Length": length, "Content-Type": "application/json"}
    )
    check_problem_document(answer, 413)


@pytest.mark.parametrize(
    ("limits", "sentence"),
    [
        ({"cost_multiplications": 1e4}, "multiplications"),
        ({"memory_bytes": 10_000}, "bytes of memory"),
        ({"answer_bytes": 10_000}, "The answer would take up to"),
    ],
)
async def test_costly_request_is_refused_with_estimate_and_limit(
    settings: Settings, limits: dict[str, float], sentence: str
) -> None:
    async with open_client(settings.model_copy(update=limits)) as client:
        document = check_problem_document(await client.post("/v1/fields", json=ask_grid()), 422)
    assert document["type"] == "/problem-types/too-costly"
    assert sentence in document["detail"]
    assert document["estimate"] > document["limit"] == next(iter(limits.values()))


async def test_readings_that_are_costly_to_make_ready_are_refused_before_that(settings: Settings) -> None:
    rows = "\n".join(f"{x}," + ",".join(str(100 + x * y % 13) for y in range(0, 61, 3)) for x in range(0, 41, 2))
    csv = "," + ",".join(str(y) for y in range(0, 61, 3)) + "\n" + rows
    film = {"condition": "film", "coefficient": 5, "ambient": {"map": "samples", "csv": csv}, "emissivity": 0.8}
    problem = slab() | {"faces": slab()["faces"] | {"z_high": film}}
    async with open_client(settings.model_copy(update={"cost_multiplications": 1e7})) as client:
        document = check_problem_document(await client.post("/v1/fields", json=ask_points(problem, [1, 1, 1])), 422)
    assert document["type"] == "/problem-types/too-costly"
    assert document["detail"].startswith("The problem alone would take about")
    assert document["estimate"] > document["limit"] == 1e7


async def test_binary_answer_may_hold_more(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"answer_bytes": 150_000})) as client:
        check_problem_document(await client.post("/v1/fields", json=ask_grid()), 422)
        binary = await client.post("/v1/fields", json=ask_grid(), headers={"Accept": "application/vnd.stillfield.npz"})
        assert binary.status_code == 200


@pytest.mark.parametrize(
    ("limits", "question", "wrong"),
    [
        ({"grid_points": 9_999}, ask_grid(), "#/evaluate/grids/0"),
        (
            {"grid_points": 19_999},
            {"problem": slab(), "evaluate": {"grids": [GRID, GRID]}},
            "#/evaluate/grids",
        ),
        ({"grids": 1}, {"problem": slab(), "evaluate": {"grids": [GRID, GRID]}}, "#/evaluate/grids"),
        ({"points": 1}, ask_points(slab(), [1, 1, 1], [2, 2, 2]), "#/evaluate/points"),
        (
            {"means": 1},
            {"problem": slab(), "evaluate": {"means": [{"face": "x_low"}] * 2}},
            "#/evaluate/means",
        ),
        (
            {"sources": 1},
            ask_points(slab() | {"sources": [{"density": 1}] * 2}, [1, 1, 1]),
            "#/problem/sources",
        ),
        ({"patches": 0}, ask_grid(), "#/problem/faces/z_low/value/patches"),
    ],
    ids=["grid", "all grids", "grids", "points", "means", "sources", "patches"],
)
async def test_lists_are_bounded(settings: Settings, limits: dict[str, int], question: Json, wrong: str) -> None:
    async with open_client(settings.model_copy(update=limits)) as client:
        document = check_problem_document(await client.post("/v1/fields", json=question), 422)
    assert pointers(document) == [wrong]
    assert "at most" in document["errors"][0]["detail"]


async def test_readings_are_bounded(settings: Settings) -> None:
    face = {"condition": "held", "value": {"map": "samples", "csv": ",0,60\n0,1,2\n40,3,4"}}
    problem = slab() | {"faces": slab()["faces"] | {"z_low": face}}
    async with open_client(settings.model_copy(update={"readings": 3})) as client:
        document = check_problem_document(await client.post("/v1/problems", json=problem), 422)
    assert "There are 4 readings; at most 3" in document["errors"][0]["detail"]


async def test_full_queue_turns_away_and_says_when_to_come_again(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    narrow = settings.model_copy(update={"worker_threads": 1, "queue_length": 1})
    with held_up(monkeypatch) as go:
        async with open_client(narrow) as client:
            waiting = [
                asyncio.create_task(client.post("/v1/fields", json=ask_points(slab(), [place, 1, 1])))
                for place in (1, 2)
            ]
            while (await client.get("/v1/diagnostics")).json()["work"]["waiting"] < 1:
                await asyncio.sleep(0.01)
            turned_away = await client.post("/v1/fields", json=ask_points(slab(), [3, 1, 1]))
            check_problem_document(turned_away, 503)
            assert int(turned_away.headers["retry-after"]) >= 1
            # Who asks for health is not in the queue.
            assert (await client.get("/health/ready")).status_code == 200
            go.set()
            assert [answer.status_code for answer in await asyncio.gather(*waiting)] == [200, 200]
            work = (await client.get("/v1/diagnostics")).json()["work"]
            assert (work["turned_away"], work["waiting"], work["running"]) == (1, 0, 0)


async def test_computation_that_takes_too_long_is_stopped(settings: Settings) -> None:
    async with open_client(settings.model_copy(update={"time_limit_seconds": 1e-3})) as client:
        document = check_problem_document(await client.post("/v1/fields", json=ask_grid()), 422)
        assert document["type"] == "/problem-types/time-limit"
        assert "not complete after 0.001 s" in document["detail"]
        assert (await client.get("/v1/diagnostics")).json()["work"]["interrupted"] == 1


async def test_request_that_was_given_up_stops_at_its_next_step(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    started, stopped = threading.Event(), threading.Event()

    def compute_for_ever(*arguments: object) -> None:
        keep_going: KeepGoing = arguments[-1]  # type: ignore[assignment]
        started.set()
        try:
            while True:
                keep_going()
        except Interrupted:
            stopped.set()
            raise

    monkeypatch.setattr("service.routes.answering._work", compute_for_ever)
    async with open_client(settings) as client:
        task = asyncio.create_task(client.post("/v1/fields", json=ask_points(slab(), [1, 1, 1])))
        await asyncio.to_thread(started.wait, 10)
        task.cancel()
        assert await asyncio.to_thread(stopped.wait, 10)


async def test_work_of_a_client_that_leaves_is_stopped(settings: Settings, monkeypatch: pytest.MonkeyPatch) -> None:
    app = create_app(settings)
    body = json.dumps(ask_grid()).encode()
    messages: list[dict[str, object]] = [
        {"type": "http.request", "body": body, "more_body": False},
        {"type": "http.disconnect"},
    ]
    scope = {
        "type": "http", "asgi": {"version": "3.0"}, "http_version": "1.1", "method": "POST", "scheme": "http",
        "path": "/v1/fields", "raw_path": b"/v1/fields", "root_path": "", "query_string": b"",
        "headers": [(b"content-type", b"application/json"), (b"content-length", str(len(body)).encode())],
        "client": ("127.0.0.1", 1), "server": ("stillfield.test", 80), "state": {},
    }  # fmt: skip

    async def receive() -> dict[str, object]:
        while len(messages) == 1 and not app.state.service.worker.report().running:
            await asyncio.sleep(0.01)
        return messages.pop(0)

    async def send(_: object) -> None:
        """Nobody is there any more."""

    async with app.router.lifespan_context(app):
        with held_up(monkeypatch):
            # The computation waits in its thread; the call ends all the same, since the client is gone.
            await asyncio.wait_for(app(scope, receive, send), 10)
            worker = app.state.service.worker
            assert worker.report().running == 1
        while worker.report().running:
            await asyncio.sleep(0.01)
        assert worker.report().interrupted == 1


async def test_loop_answers_while_all_workers_compute(settings: Settings, monkeypatch: pytest.MonkeyPatch) -> None:
    with held_up(monkeypatch) as go:
        async with open_client(settings) as client:
            tasks = [
                asyncio.create_task(client.post("/v1/fields", json=ask_points(slab(), [place, 1, 1])))
                for place in (1, 2, 3)
            ]
            await asyncio.sleep(0.05)
            async with asyncio.timeout(5):
                assert (await client.get("/health/live")).status_code == 200
            go.set()
            await asyncio.gather(*tasks)


async def test_work_given_up_while_it_waits_leaves_its_place_in_the_queue() -> None:
    worker = Worker(threads=1, queue_length=2, time_limit_seconds=30)
    go = threading.Event()
    first = asyncio.ensure_future(worker.run(lambda _: go.wait(20)))
    waiting = [asyncio.ensure_future(worker.run(lambda _: None)) for _ in range(2)]
    await asyncio.sleep(0.05)
    for task in waiting:
        task.cancel()
    await asyncio.gather(*waiting, return_exceptions=True)
    go.set()
    await first
    while worker.report().running or worker.report().waiting:
        await asyncio.sleep(0.01)
    # Twice over: nothing of what was given up is still counted.
    for _ in range(6):
        await worker.run(lambda _: None)
    assert worker.report().interrupted == 2
    worker.close()
