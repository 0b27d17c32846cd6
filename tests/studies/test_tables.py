"""Tables and answers of studies on their way to clients: in every form, of any length, few at a time."""

from __future__ import annotations

import asyncio
import csv
import io
import json
import tracemalloc
from collections.abc import AsyncIterator, Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import httpx
import numpy as np
import pytest
from starlette.types import Message

from service import __version__
from service.models.studies import StudyTable
from service.refusals import QueueFull, TooCostly, UnknownStudy
from service.settings import Settings
from service.studies.forms import BINARY_TABLE, CSV_TABLE, JSON_TABLE, LINES_TABLE, table_in
from service.studies.pages import Extent, extent_of, pages, whole_table
from service.studies.sending import Pieces, Sending
from service.studies.store import Acceptance, StudyStore
from tests.api.client import check_problem_document, open_client
from tests.studies.asking import cases_of, coefficients, quick, run_to_end
from tests.studies.filling import REASON, STUDY, columns, fill, numbers_of, outcomes

pytestmark = pytest.mark.anyio

ADDRESS = f"/v1/studies/{STUDY}/results"
WAVES, CHUNK, FAILED = [70, 0, 33, 1], 16, frozenset({2, 15})
ANY_LENGTH = 1 << 40


@pytest.fixture
def path(settings: Settings) -> Path:
    """The store of the studies of a service that is not running."""
    return settings.studies_folder / "studies.sqlite3"


def extent(store: StudyStore) -> Extent:
    study = store.study(STUDY)
    assert study is not None
    return extent_of(store, study)


def numbers() -> Any:
    return np.concatenate([numbers_of(cases, wave) for wave, cases in enumerate(WAVES)])


def number_of(cell: str) -> float:
    return float(cell) if cell else np.nan


def without_nulls(column: list[float | None]) -> list[float]:
    return [np.nan if value is None else value for value in column]


@pytest.fixture
async def filled(settings: Settings, path: Path, monkeypatch: pytest.MonkeyPatch) -> AsyncIterator[httpx.AsyncClient]:
    """A client of a service with the table of a study, of which a page has some chunks of a wave, or several waves."""
    monkeypatch.setattr("service.studies.pages.PAGE_BYTES", 6000)
    path.parent.mkdir()
    fill(path, WAVES, CHUNK, columns(3, limits=2), FAILED)
    async with open_client(settings) as client:
        yield client


async def test_long_table_reads_back_equal_in_every_form(filled: httpx.AsyncClient) -> None:
    expected = outcomes(WAVES, CHUNK, 3, FAILED)
    margins = 0.5 - expected.values[:, :2]
    held = np.where(margins > 0, "yes", "no").astype(object)
    held[np.isnan(margins)] = None

    table = (await filled.get(ADDRESS)).json()
    StudyTable.model_validate(table)
    assert table["case"] == list(range(104))
    np.testing.assert_array_equal(np.transpose([one["values"] for one in table["numbers"]]), numbers())
    values = np.transpose([without_nulls(one["values"]) for one in table["columns"]])
    np.testing.assert_array_equal(values, expected.values)
    bounds = np.transpose([without_nulls(one["error_bounds"]) for one in table["columns"]])
    np.testing.assert_array_equal(bounds, expected.bounds)
    np.testing.assert_array_equal(np.transpose([without_nulls(one["margins"]) for one in table["limits"]]), margins)
    assert np.transpose([one["held"] for one in table["limits"]]).tolist() == held.tolist()
    assert {one["case"]: one["message"] for one in table["failures"]} == dict.fromkeys(expected.failures, REASON)

    binary = (await filled.get(ADDRESS, params={"format": "npz"})).content
    with np.load(io.BytesIO(binary)) as archive:
        named = json.loads(str(archive["answer"]))
        np.testing.assert_array_equal(archive[named["case"]], range(104))
        for index, column in enumerate(named["columns"]):
            np.testing.assert_array_equal(archive[column["values"]], expected.values[:, index])
            np.testing.assert_array_equal(archive[column["error_bounds"]], expected.bounds[:, index])

    lines = [json.loads(line) for line in (await filled.get(ADDRESS, params={"format": "jsonl"})).text.splitlines()]
    assert [line["case"] for line in lines] == table["case"]
    np.testing.assert_array_equal([list(line["numbers"].values()) for line in lines], numbers())
    np.testing.assert_array_equal([without_nulls(list(line["values"].values())) for line in lines], expected.values)
    np.testing.assert_array_equal([without_nulls([one["margin"] for one in line["limits"]]) for line in lines], margins)
    assert [line["failure"]["message"] for line in lines if "failure" in line] == [REASON] * len(expected.failures)

    text = (await filled.get(ADDRESS, params={"format": "csv"})).text
    head, *rows = csv.reader(io.StringIO(text, newline=""))
    assert head[:5] == ["case", "a [mm]", "b [1]", "result 0 [degC]", "result 0 error bound"]
    cells = np.array([[number_of(cell) for cell in row[1:9]] for row in rows])
    np.testing.assert_array_equal(cells[:, :2], numbers())
    np.testing.assert_array_equal(cells[:, 2::2], expected.values)
    np.testing.assert_array_equal(cells[:, 3::2], expected.bounds)
    assert [[row[10] or None, row[12] or None] for row in rows] == held.tolist()
    assert [row[13:] for row in rows] == [
        ["no-case", REASON] if case in expected.failures else ["", ""] for case in range(104)
    ]


@pytest.mark.parametrize("form", ["json", "npz"])
async def test_table_made_as_a_whole_is_refused_by_its_counts_when_it_is_too_long(
    settings: Settings, path: Path, form: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    path.parent.mkdir()
    fill(path, WAVES, CHUNK, columns(3, limits=2), FAILED)
    small = settings.model_copy(update={"answer_bytes": 8000})
    async with open_client(small) as client:
        rows = await client.get(ADDRESS, params={"format": "csv"})
        assert (rows.status_code, len(rows.content) > 8000) == (200, True)
        # Known before anything is read.
        monkeypatch.setattr("service.studies.pages._read", None)
        document = check_problem_document(await client.get(ADDRESS, params={"format": form}), 422)
    assert document["type"].endswith("too-costly")
    assert document["limit"] == 8000 < document["estimate"]
    assert "text/csv" in document["detail"]


@pytest.mark.parametrize("shape", [(0, 0), (1, 0), (3, 2), (2, 2)])
@pytest.mark.parametrize("failed", [frozenset[int](), FAILED, frozenset(range(16))])
def test_no_table_is_longer_than_was_said(path: Path, shape: tuple[int, int], failed: frozenset[int]) -> None:
    path.parent.mkdir()
    fill(path, [400], CHUNK, columns(*shape), failed)
    with closing(StudyStore(path, ANY_LENGTH, 1)) as store:
        for form in (JSON_TABLE, BINARY_TABLE):
            with pytest.raises(TooCostly) as refused:
                next(table_in(form, store, extent(store), 1))
            (body,) = table_in(form, store, extent(store), ANY_LENGTH)
            # Names of columns, and of entries of an archive, are beside what grows with the cases.
            assert 0.3 * refused.value.estimate < len(body) < refused.value.estimate + 12_000


@pytest.mark.parametrize("form", [LINES_TABLE, CSV_TABLE])
def test_rows_take_no_more_memory_the_more_there_are(path: Path, form: Any) -> None:
    path.parent.mkdir()
    fill(path, [12_000], 500, columns(40))
    with closing(StudyStore(path, ANY_LENGTH, 1)) as store:
        tracemalloc.start()
        try:
            size = sum(len(piece) for piece in table_in(form, store, extent(store), 0))
            _, most = tracemalloc.get_traced_memory()
        finally:
            tracemalloc.stop()
    # A page of a third of a MiB as numbers of the interpreter and as text, of a table of 7 MiB.
    assert size > 18e6
    assert most < 9e6


def test_table_that_grows_meanwhile_ends_where_it_ended(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("service.studies.pages.PAGE_BYTES", 1)
    path.parent.mkdir()
    fill(path, [48], CHUNK, columns(1))
    with closing(StudyStore(path, ANY_LENGTH, 1)) as store:
        before = extent(store)
        read = pages(store, before)
        first = next(read)
        store.begin_wave(STUDY, 1, numbers_of(5, 1), None)
        store.keep(STUDY, 1, 0, outcomes([5], CHUNK, 1, frozenset()), 0.1)
        cases = [first.case, *(page.case for page in read)]
        assert np.concatenate(cases).tolist() == list(range(48))
        assert whole_table(store, extent(store)).case.tolist() == list(range(53))


@pytest.mark.parametrize("comes_again", [False, True])
def test_table_that_is_deleted_meanwhile_does_not_seem_to_end(
    path: Path, monkeypatch: pytest.MonkeyPatch, comes_again: bool
) -> None:
    monkeypatch.setattr("service.studies.pages.PAGE_BYTES", 1)
    path.parent.mkdir()
    fill(path, [48], CHUNK, columns(1))
    with closing(StudyStore(path, ANY_LENGTH, 1)) as store:
        before = extent(store)
        read = pages(store, before)
        next(read)
        store.forget(STUDY, before.study.attempt)
        if comes_again:
            store.accept(Acceptance(STUDY, "cases", b"{}", __version__, columns(1), CHUNK, 48, 0))
        with pytest.raises(UnknownStudy):
            next(read)
        with pytest.raises(UnknownStudy):
            extent_of(store, before.study)


class Client:
    """Whoever takes an answer: all of it, or so many pieces before leaving or taking nothing more."""

    def __init__(self, most: int | None = None, *, leaves: bool = False) -> None:
        self.messages: list[Message] = []
        self._most = most
        self._leaves = leaves
        self._left = asyncio.Event()

    async def receive(self) -> Message:
        await self._left.wait()
        return {"type": "http.disconnect"}

    async def send(self, message: Message) -> None:
        if self._most is not None and len(self.messages) > self._most:
            if self._leaves:
                self._left.set()
            await asyncio.sleep(60)
        self.messages.append(message)

    async def take(self, pieces: Pieces) -> None:
        await pieces({"type": "http"}, self.receive, self.send)

    @property
    def has_end(self) -> bool:
        return not self.messages[-1].get("more_body", True)


@pytest.fixture
def sending() -> Iterator[Sending]:
    with closing(Sending(1)) as opened:
        yield opened


def endless() -> Iterator[bytes]:
    while True:
        yield b"a line\n"


def broken() -> Iterator[bytes]:
    yield b"a line\n"
    raise UnknownStudy("It was deleted.")


async def test_pieces_come_one_after_the_other(sending: Sending) -> None:
    client = Client()
    await client.take(Pieces(sending, iter([b"", b"a" * 600_000, b"b"]), "text/csv", {"Vary": "Accept"}))
    assert b"".join(message.get("body", b"") for message in client.messages) == b"a" * 600_000 + b"b"
    assert max(len(message.get("body", b"")) for message in client.messages) < 300_000
    assert client.has_end


async def test_part_of_a_table_does_not_pass_for_the_whole(sending: Sending, caplog: pytest.LogCaptureFixture) -> None:
    client = Client()
    await client.take(Pieces(sending, broken(), "text/csv", {}))
    assert client.messages[-1]["body"] == b"a line\n"
    assert not client.has_end
    assert "broken off (It was deleted.)" in caplog.text


async def test_client_that_leaves_or_takes_nothing_more_gives_its_place_up(
    sending: Sending, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("service.studies.sending.STALLED_SECONDS", 0.2)
    for leaves in (True, False):
        client = Client(3, leaves=leaves)
        async with asyncio.timeout(10):
            await client.take(Pieces(sending, endless(), "text/csv", {}))
        assert len(client.messages) == 4
        assert not client.has_end
    with sending.place(), pytest.raises(QueueFull), sending.place():
        pass
    with sending.place():
        pass


async def test_few_tables_are_sent_at_a_time_and_everything_else_goes_on(settings: Settings) -> None:
    async with open_client(quick(settings).model_copy(update={"studies_sent": 2})) as client:
        shown = await run_to_end(client, cases_of(coefficients(3)))
        transport = client._transport
        assert isinstance(transport, httpx.ASGITransport)
        sending = transport.app.state.service.sending  # type: ignore[attr-defined]
        with sending.place(), sending.place():
            for address in (shown["results"], shown["answer"]):
                busy = await client.get(address)
                check_problem_document(busy, 503)
                assert int(busy.headers["retry-after"]) >= 1
            assert (await client.get("/health/ready")).status_code == 200
            assert (await client.get("/v1/studies")).status_code == 200
        for address in (shown["results"], shown["answer"]):
            assert (await client.get(address)).status_code == 200
