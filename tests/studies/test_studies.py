"""Studies over HTTP: accepted, answered, cancelled, begun again, forgotten."""

from __future__ import annotations

import asyncio
import io
import itertools
import json
import time
from collections.abc import AsyncIterator, Iterator
from pathlib import Path
from types import SimpleNamespace

import httpx
import numpy as np
import pytest

from service.models.operation import Diagnostics
from service.models.studies import StudiesAnswer, StudyAnswer, StudyTable
from service.settings import Settings
from service.store import ProblemStore
from service.studies.reading import acceptance, read_study
from service.translation.solving import Solver
from tests.api.client import check_problem_document, open_client, pointers
from tests.api.halden_reach import Json, changed
from tests.studies.asking import cases_of, coefficients, cold_side, quick, read_csv, run_to_end

pytestmark = pytest.mark.anyio


@pytest.fixture
async def studies(settings: Settings) -> AsyncIterator[httpx.AsyncClient]:
    async with open_client(quick(settings)) as opened:
        yield opened


async def test_study_is_accepted_at_once_and_answers_what_the_call_answers(studies: httpx.AsyncClient) -> None:
    study = cases_of(coefficients(12))
    accepted = await studies.post("/v1/studies", json=study)
    assert accepted.status_code == 202
    StudyAnswer.model_validate(accepted.json())
    assert accepted.headers["location"] == f"/v1/studies/{accepted.json()['study_id']}"
    assert int(accepted.headers["retry-after"]) >= 1

    shown = await run_to_end(studies, study)
    assert shown["study_id"] == accepted.json()["study_id"]
    assert shown["state"] == "finished"
    assert shown["progress"] == {"cases_done": 12, "cases_failed": 0, "cases_expected": 12, "seconds_left": None}
    answered = await studies.get(shown["answer"])
    assert answered.json() == (await studies.post("/v1/cases", json=study["question"])).json()

    again = await studies.post("/v1/studies", json=study)
    assert (again.status_code, again.json()) == (200, shown)
    by_id = changed(study, "question/problem", ...)
    stored = await studies.post("/v1/problems", json=study["question"]["problem"])
    by_id["question"]["problem_id"] = stored.json()["problem_id"]
    same = await studies.post("/v1/studies", json=by_id)
    assert (same.status_code, same.json()) == (200, shown)

    listed = StudiesAnswer.model_validate((await studies.get("/v1/studies")).json())
    assert [entry.study_id for entry in listed.studies] == [shown["study_id"]]
    state = (await studies.get("/v1/diagnostics")).json()
    Diagnostics.model_validate(state)
    assert (state["studies"]["finished"], state["studies"]["cases"]) == (1, 12)
    assert 'stillfield_studies{state="finished"} 1.0' in (await studies.get("/metrics")).text


async def test_table_is_the_same_in_every_form(studies: httpx.AsyncClient) -> None:
    given = [*coefficients(5), -3.0, 250.0]
    shown = await run_to_end(studies, cases_of(given))
    assert shown["state"] == "finished"
    assert shown["progress"]["cases_failed"] == 1
    address = shown["results"]

    table = (await studies.get(address)).json()
    StudyTable.model_validate(table)
    assert table["case"] == list(range(7))
    assert table["numbers"][0]["values"] == given
    cold, loss = table["columns"]
    assert (cold["name"], cold["unit"], loss["unit"]) == ("cold side", "degC", "W")
    computed = [index for index in range(7) if index != 5]
    for index in computed:
        # By the resistances in series, within the bound that stands beside it.
        assert abs(cold["values"][index] - cold_side(given[index])) <= cold["error_bounds"][index] + 1e-10
    assert cold["values"][5] is loss["values"][5] is cold["error_bounds"][5] is None
    assert [failure["case"] for failure in table["failures"]] == [5]
    assert shown["failures"] == table["failures"]
    failure = {key: table["failures"][0][key] for key in ("code", "message")}
    assert "/problem/faces/z_high/coefficient" in failure["message"]

    answer = await studies.get(address, headers={"Accept": "application/jsonl"})
    assert answer.headers["content-type"] == "application/jsonl"
    lines = [json.loads(line) for line in answer.text.splitlines()]
    assert [line["case"] for line in lines] == table["case"]
    assert [line["values"]["cold side"] for line in lines] == cold["values"]
    assert [line["error_bounds"]["loss"] for line in lines] == loss["error_bounds"]
    assert [line.get("failure") for line in lines] == [failure if index == 5 else None for index in range(7)]

    answer = await studies.get(address, params={"format": "csv"})
    assert answer.headers["content-type"].startswith("text/csv")
    assert "cases.csv" in answer.headers["content-disposition"]
    head, *rows = read_csv(answer.text)
    assert head[:4] == ["case", "film [W/(m^2 K)]", "cold side [degC]", "cold side error bound"]
    assert [float(row[2]) if row[2] else None for row in rows] == cold["values"]
    assert rows[5][2:] == ["", "", "", "", failure["code"], failure["message"]]

    answer = await studies.get(address, headers={"Accept": "application/vnd.stillfield.npz"})
    with np.load(io.BytesIO(answer.content)) as archive:
        names = json.loads(str(archive["answer"]))
        values = archive[names["columns"][0]["values"]]
        assert np.flatnonzero(np.isnan(values)).tolist() == [5]
        assert values[computed].tolist() == [cold["values"][index] for index in computed]
        assert archive[names["case"]].tolist() == table["case"]

    check_problem_document(await studies.get(address, params={"format": "xls"}), 406)
    check_problem_document(await studies.get(address, headers={"Accept": "image/png"}), 406)


async def test_table_says_in_every_form_how_the_limits_of_the_question_hold(studies: httpx.AsyncClient) -> None:
    given = [*coefficients(5), -3.0, 3000.0]
    study = cases_of(given)
    study["question"]["limits"] = [
        {"result": "cold side", "at_most": "300 degC", "at_least": 25},
        {"name": "=loss", "result": "loss", "at_most": 2000},
    ]
    shown = await run_to_end(studies, study)
    address = shown["results"]
    table = (await studies.get(address)).json()
    StudyTable.model_validate(table)
    assert table["limits"] == (await studies.get(shown["answer"])).json()["limits"]
    limit, named = table["limits"]
    assert (limit["result"], limit["at_most"], limit["at_least"]) == ("cold side", 300, 25)
    assert (limit["unit_of_margins"], named["name"], named["unit_of_margins"]) == ("K", "=loss", "W")
    cold = [cold_side(value) for value in given]
    for case in (0, 1, 2, 3, 4, 6):
        expected = min(300 - cold[case], cold[case] - 25)
        assert abs(limit["margins"][case] - expected) <= limit["error_bounds"][case] + 1e-10
    assert limit["held"] == ["no", "no", "no", "no", "no", None, "yes"]
    assert limit["margins"][5] is limit["error_bounds"][5] is named["held"][5] is None

    lines = (await studies.get(address, headers={"Accept": "application/jsonl"})).text.splitlines()
    told = [json.loads(line)["limits"] for line in lines]
    assert [one[0]["margin"] for one in told] == limit["margins"]
    assert [one[1]["held"] for one in told] == named["held"]

    text = await studies.get(address, params={"format": "csv"})
    head, *rows = read_csv(text.text)
    assert head[6:10] == [
        "cold side at least 25 degC and at most 300 degC margin [K]",
        "cold side at least 25 degC and at most 300 degC held",
        "'=loss margin [W]",
        "'=loss held",
    ]
    assert [float(row[6]) if row[6] else None for row in rows] == limit["margins"]
    assert [row[9] or None for row in rows] == named["held"]
    # While a client waits the table is the same.
    at_once = await studies.post("/v1/cases", json=study["question"], headers={"Accept": "text/csv"})
    assert at_once.headers["content-type"].startswith("text/csv")
    assert at_once.content == text.content

    answer = await studies.get(address, headers={"Accept": "application/vnd.stillfield.npz"})
    with np.load(io.BytesIO(answer.content)) as archive:
        shown = json.loads(str(archive["answer"]))["limits"][0]
        assert np.nan_to_num(archive[shown["margins"]], nan=7.0).tolist() == [
            7.0 if margin is None else margin for margin in limit["margins"]
        ]
        assert shown["held"] == limit["held"]


async def test_cancelled_study_keeps_its_cases_and_goes_on_when_it_is_posted_again(studies: httpx.AsyncClient) -> None:
    study = cases_of(coefficients(400))
    study["question"]["limits"] = [{"result": "cold side", "at_most": 300}]
    address = (await studies.post("/v1/studies", json=study)).headers["location"]
    async for done in progress_of(studies, address):
        if done > 0:
            break
    cancelled = await studies.post(f"{address}/cancel")
    assert cancelled.json()["state"] == "cancelled"
    assert cancelled.json()["ended"] is not None
    check_problem_document(await studies.get(f"{address}/answer"), 409)
    partial = (await studies.get(f"{address}/results")).json()
    assert [len(column["held"]) for column in partial["limits"]] == [len(partial["case"])]
    assert 0 < len(partial["case"]) < 400
    assert (await studies.post(f"{address}/cancel")).json()["state"] == "cancelled"

    shown = await run_to_end(studies, study)
    assert shown["state"] == "finished"
    whole = (await studies.get(f"{address}/results")).json()
    assert whole["case"] == list(range(400))
    for index, case in enumerate(partial["case"]):
        assert partial["columns"][0]["values"][index] == whole["columns"][0]["values"][case]
    # Each case was computed once, in the first attempt or in the second.
    assert (await studies.get("/v1/diagnostics")).json()["studies"]["cases"] == 400

    assert (await studies.delete(address)).status_code == 204
    check_problem_document(await studies.get(address), 404)
    check_problem_document(await studies.delete(address), 404)
    assert (await studies.get("/v1/diagnostics")).json()["studies"]["size"] == 0
    # What is forgotten is computed again.
    shown = await run_to_end(studies, cases_of(coefficients(2), "another wall"))
    assert (await studies.delete(shown["answer"].removesuffix("/answer"))).status_code == 204
    assert (await run_to_end(studies, cases_of(coefficients(2), "another wall")))["state"] == "finished"


async def progress_of(client: httpx.AsyncClient, address: str) -> AsyncIterator[int]:
    """Cases done, each time the study is looked at."""
    for _ in range(3000):
        shown = (await client.get(address)).json()
        assert shown["state"] in ("waiting", "running"), shown
        yield shown["progress"]["cases_done"]
        await asyncio.sleep(0.02)
    pytest.fail("The study came to nothing.")


async def test_study_that_waits_or_runs_is_not_forgotten(studies: httpx.AsyncClient) -> None:
    address = (await studies.post("/v1/studies", json=cases_of(coefficients(2000)))).headers["location"]
    check_problem_document(await studies.delete(address), 409)
    async for done in progress_of(studies, address):
        if done > 0:
            break
    # At once: a client that waited for the end would find the answer gone with the study.
    document = check_problem_document(await studies.delete(address), 409)
    assert document["detail"] == "The study is running; cancel it first."
    assert (await studies.get(address)).json()["state"] == "running"
    await studies.post(f"{address}/cancel")
    assert (await studies.delete(address)).status_code == 204


async def test_events_tell_of_a_study_until_it_is_over(studies: httpx.AsyncClient) -> None:
    address = (await studies.post("/v1/studies", json=cases_of(coefficients(40)))).headers["location"]
    stream = await studies.get(f"{address}/progress")
    assert stream.headers["content-type"].startswith("text/event-stream")
    told = list(read_events(stream.text))
    assert told[-1]["event"] == "finished"
    assert {entry["event"] for entry in told[:-1]} <= {"waiting", "running"}
    ids = [int(entry["id"]) for entry in told]
    assert ids == sorted(set(ids))
    last = json.loads(told[-1]["data"])
    assert last == (await studies.get(address)).json()
    done = [json.loads(entry["data"])["progress"]["cases_done"] for entry in told]
    assert done == sorted(done)
    assert done[-1] == 40

    # A stream that broke before its last event is taken up with that, one that was seen to its end with nothing.
    resumed = await studies.get(f"{address}/progress", headers={"Last-Event-ID": str(ids[-1] - 1)})
    assert [entry["id"] for entry in read_events(resumed.text)] == [str(ids[-1])]
    over = await studies.get(f"{address}/progress", headers={"Last-Event-ID": str(ids[-1])})
    assert over.status_code == 204
    check_problem_document(await studies.get("/v1/studies/none/progress"), 404)


def read_events(text: str) -> Iterator[dict[str, str]]:
    """The events of a stream, comments left out."""
    for block in text.split("\n\n"):
        lines = [line.partition(": ") for line in block.splitlines() if not line.startswith(":")]
        if lines:
            yield {name: value for name, _, value in lines}


async def test_unfinished_study_goes_on_with_the_next_start(settings: Settings) -> None:
    study = cases_of(coefficients(400))
    async with open_client(quick(settings)) as client:
        address = (await client.post("/v1/studies", json=study)).headers["location"]
        async for done in progress_of(client, address):
            if done > 0:
                break
    async with open_client(quick(settings)) as client:
        # Nobody has to ask for it again.
        before = (await client.get(address)).json()["progress"]["cases_done"]
        assert 0 < before < 400
        for _ in range(4):
            shown = (await client.get(address, headers={"Prefer": "wait=30"})).json()
            if shown["ended"]:
                break
        assert shown["state"] == "finished"
        computed = (await client.get("/v1/diagnostics")).json()["studies"]["cases"]
        assert before + computed >= 400 > computed
    async with open_client(quick(settings)) as client:
        again = await client.post("/v1/studies", json=study)
        assert (again.status_code, again.json()) == (200, shown)
        assert (await client.get("/v1/diagnostics")).json()["studies"]["cases"] == 0


async def test_study_begun_by_another_release_is_not_mixed_with_this_one(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    study = cases_of(coefficients(400))
    async with open_client(quick(settings)) as client:
        first = (await client.post("/v1/studies", json=study)).json()["study_id"]
    for module in ("reading", "studies"):
        monkeypatch.setattr(f"service.studies.{module}.__version__", "9.9")
    async with open_client(quick(settings)) as client:
        shown = (await client.get(f"/v1/studies/{first}")).json()
        assert (shown["state"], shown["fault"]["code"]) == ("failed", "other-release")
        other = (await client.post("/v1/studies", json=study)).json()
        assert other["study_id"] != first
        await client.post(f"/v1/studies/{other['study_id']}/cancel")


@pytest.mark.parametrize(
    ("path", "new", "pointer"),
    [
        ("study", "guesses", "#/study"),
        ("question/results/0/face", "lid", "#/question/results/0/face"),
        ("question/problem/body/size/x", "4 kg", "#/question/problem/body/size/x"),
        ("question/numbers/0/at", "/problem/nowhere", "#/question/numbers/0/at"),
        ("question/cases", ..., "#/question/cases"),
        ("question", ..., "#/question"),
        ("question/problem/faces/z_low", {"condition": "insulated"}, None),
    ],
)
async def test_wrong_study_is_refused_with_a_pointer(
    studies: httpx.AsyncClient, settings: Settings, path: str, new: object, pointer: str | None
) -> None:
    study = cases_of(coefficients(3))
    if pointer is None:
        # A body of which nothing fixes the level.
        study = changed(study, "question/problem/faces/z_high", {"condition": "flux", "inflow": 5})
    document = check_problem_document(await studies.post("/v1/studies", json=changed(study, path, new)), 422)
    if pointer is not None:
        assert pointer in pointers(document)
    assert all(entry.startswith(("#/study", "#/question")) for entry in pointers(document))
    assert not settings.studies_folder.exists()


async def test_bounds_hold_before_work_begins(settings: Settings) -> None:
    bounded = quick(settings).model_copy(update={"study_cases": 20, "studies_running": 1, "studies_waiting": 1})
    async with open_client(bounded) as client:
        document = check_problem_document(await client.post("/v1/studies", json=cases_of(coefficients(21))), 422)
        assert (document["estimate"], document["limit"]) == (21, 20)
        answers = [await client.post("/v1/studies", json=cases_of(coefficients(20), f"wall {n}")) for n in range(2)]
        assert [answer.status_code for answer in answers] == [202, 503]
        assert "retry-after" in answers[1].headers
    narrow = quick(settings).model_copy(
        update={"memory_bytes": 200_000, "studies_folder": settings.studies_folder / "a"}
    )
    async with open_client(narrow) as client:
        document = check_problem_document(await client.post("/v1/studies", json=cases_of(coefficients(2000))), 422)
        # A number and two results with their bounds, as many times as they are there while the answer is made.
        assert (document["estimate"], document["limit"]) == (2000 * 3 * 40, 200_000)
        limited = cases_of(coefficients(1000))
        limited["question"]["limits"] = [{"result": "loss", "at_most": 2000}]
        assert check_problem_document(await client.post("/v1/studies", json=limited), 422)["estimate"] == 1000 * 320
    small = quick(settings).model_copy(update={"studies_bytes": 1000, "studies_folder": settings.studies_folder / "b"})
    async with open_client(small) as client:
        check_problem_document(await client.post("/v1/studies", json=cases_of(coefficients(20))), 507)
        assert (await client.get("/v1/studies")).json() == {"studies": []}


async def test_case_that_takes_too_long_fails_in_its_place(settings: Settings) -> None:
    hurried = quick(settings).model_copy(update={"study_case_seconds": 1e-6})
    async with open_client(hurried) as client:
        shown = await run_to_end(client, cases_of(coefficients(3)))
        assert shown["state"] == "finished"
        assert {failure["code"] for failure in shown["failures"]} == {"time-limit"}


async def test_waiting_for_a_study_is_bounded(studies: httpx.AsyncClient) -> None:
    study: Json = cases_of(coefficients(2))
    answer = await studies.post("/v1/studies", json=study, headers={"Prefer": "respond-async, wait=3000"})
    assert answer.headers["preference-applied"] == "wait=30"
    assert answer.status_code == 200
    assert answer.json()["state"] == "finished"
    address = answer.headers["location"]
    # Names of preferences are of either case, and values may be quoted.
    for preference in ("WAIT=5", 'wait="5"', "respond-async, Wait = 5"):
        answer = await studies.get(address, headers={"Prefer": preference})
        assert answer.headers["preference-applied"] == "wait=5"


async def test_second_service_on_the_same_studies_is_told_so(settings: Settings, tmp_path: object) -> None:
    async with open_client(quick(settings)) as first:
        shown = await run_to_end(first, cases_of(coefficients(2)))
        assert shown["state"] == "finished"
        async with open_client(quick(settings)) as second:
            document = check_problem_document(await second.get(f"/v1/studies/{shown['study_id']}"), 503)
            assert str(settings.studies_folder) not in document["detail"]
            assert (await second.get("/health/live")).status_code == 200
            # All that is not about studies is told as ever.
            state = Diagnostics.model_validate((await second.get("/v1/diagnostics")).json())
            assert state.studies is None
            text = (await second.get("/metrics")).text
            assert "stillfield_work_running" in text
            assert "stillfield_studies" not in text
    async with open_client(quick(settings)) as third:
        assert (await third.get(f"/v1/studies/{shown['study_id']}")).json() == shown


async def test_damaged_file_of_the_engine_is_set_aside_and_studies_go_on(settings: Settings) -> None:
    study = cases_of(coefficients(400))
    async with open_client(quick(settings)) as client:
        address = (await client.post("/v1/studies", json=study)).headers["location"]
    engine = settings.studies_folder / "engine.sqlite3"
    for rest in ("-wal", "-shm"):
        engine.with_name(engine.name + rest).unlink(missing_ok=True)
    engine.write_bytes(b"no such file format" * 500)
    async with open_client(quick(settings)) as client:
        async for done in progress_of(client, address):
            if done > 0:
                break
    assert len(list(settings.studies_folder.glob("engine.sqlite3.damaged-*"))) == 1


async def test_damaged_store_of_studies_leaves_everything_else_alone(settings: Settings) -> None:
    settings.studies_folder.mkdir(parents=True)
    (settings.studies_folder / "studies.sqlite3").write_bytes(b"no such file format" * 500)
    async with open_client(quick(settings)) as client:
        for answer in (await client.get("/v1/studies"), await client.post("/v1/studies", json=cases_of([1.0]))):
            assert "damaged" in check_problem_document(answer, 503)["detail"]
        assert (await client.post("/v1/cases", json=cases_of([1.0])["question"])).status_code == 200


async def test_long_tables_come_in_pieces_and_not_as_one_document(settings: Settings) -> None:
    async with open_client(quick(settings).model_copy(update={"answer_bytes": 1000})) as client:
        shown = await run_to_end(client, cases_of(coefficients(20)))
        for address in (shown["results"], shown["answer"]):
            document = check_problem_document(await client.get(address), 422)
            assert document["type"].endswith("too-costly")
            assert "piece by piece" in document["detail"]
        for form, lines in (("jsonl", 20), ("csv", 21)):
            answer = await client.get(shown["results"], params={"format": form})
            assert answer.status_code == 200
            assert len(answer.text.splitlines()) == lines


def test_busy_machine_makes_no_chunks_of_single_cases(
    settings: Settings, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    solver = Solver(settings, ProblemStore(tmp_path / "problems.sqlite3", 1_000_000))
    asked = cases_of(coefficients(100))
    study = read_study(asked["study"], asked["question"], solver, settings, lambda: None)
    # The processor does little while the clock goes on: the time for trying cases is over at once.
    clock = SimpleNamespace(perf_counter=itertools.count(step=10.0).__next__, thread_time=time.thread_time)
    monkeypatch.setattr("service.translation.case_time.time", clock)
    assert acceptance(study, settings, lambda: None).chunk_size > 5
