"""Waves in chunks: from the store what is finished, from the crew the rest, whatever becomes of it."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterator
from concurrent.futures import Future
from contextlib import closing
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.refusals import QueueFull, StoreBusy, StoreFull, UnknownStudy, WrongState
from service.studies.chunk_work import ChunkOutcome
from service.studies.chunks import DurableEvaluate, TooManyCases, chunk_size_for, chunks_of
from service.studies.crew import CrewLost, TimeOver, WorkerLost
from service.studies.pages import Table, extent_of, whole_table
from service.studies.patience import patiently
from service.studies.store import Acceptance, NotRepeatable, Study, StudyStore
from service.translation.case_columns import Column, Columns

COLUMNS = Columns((Column("a", "1"), Column("b", "mm")), (Column("sum", "K"),))


def computed(cases: FloatArray) -> Evaluations:
    """The sum of the numbers of each case, with a bound; it fails where the first number is negative."""
    values = cases.sum(axis=1, keepdims=True)
    failures = {
        int(case): Failure("negative", "The first number is negative.") for case in np.flatnonzero(cases[:, 0] < 0)
    }
    values[list(failures)] = np.nan
    return Evaluations(values, 1e-9 * np.abs(values), failures)


def table_of(store: StudyStore) -> Table:
    """The whole table of the one study."""
    study = store.study("s")
    assert study is not None
    return whole_table(store, extent_of(store, study))


@dataclass
class Crew:
    """Computes at once. trouble: raised in place of an outcome, asked with the cases and how often they came."""

    trouble: Callable[[FloatArray, int], Exception | None] = lambda cases, times: None
    asked: list[list[float]] = field(default_factory=list)
    size: int = 2
    is_reachable: bool = True

    def submit(self, work: bytes, cases: FloatArray, accuracy: float | None, seconds: float) -> Future[ChunkOutcome]:
        self.asked.append(cases[:, 0].tolist())
        outcome: Future[ChunkOutcome] = Future()
        error = self.trouble(cases, self.asked.count(self.asked[-1]))
        if error is None:
            outcome.set_result(ChunkOutcome(computed(cases), 0.01))
        else:
            outcome.set_exception(error)
        return outcome

    def close(self) -> None: ...

    @property
    def cases(self) -> list[float]:
        """The first number of every case that was asked for."""
        return [case for chunk in self.asked for case in chunk]


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "studies.sqlite3"


@pytest.fixture
def store(path: Path) -> Iterator[StudyStore]:
    opened = StudyStore(path, 1_000_000, 10)
    yield opened
    opened.close()


def begun(store: StudyStore, study_id: str = "s", chunk_size: int = 16) -> Study:
    accepted = store.accept(acceptance(study_id, chunk_size))
    study = store.begin(study_id, accepted.attempt)
    assert study is not None
    return study


def attempt_of(store: StudyStore) -> int:
    study = store.study("s")
    assert study is not None
    return study.attempt


def acceptance(study_id: str, chunk_size: int = 16, reserved: int = 1000) -> Acceptance:
    return Acceptance(study_id, "cases", b"{}", "0", COLUMNS, chunk_size, 100, reserved)


def durable(store: StudyStore, crew: Crew, ask_on: Callable[[], None] = lambda: None) -> DurableEvaluate:
    study = store.study("s") or begun(store)
    return DurableEvaluate(study, b"", store, crew, case_seconds=1.0, most_cases=1000, ask_on=ask_on)


def wave(count: int, begin: float = 0.0) -> FloatArray:
    return np.column_stack([begin + np.arange(count), np.full(count, 0.25)])


def check_same(found: Evaluations, expected: Evaluations) -> None:
    np.testing.assert_array_equal(found.values, expected.values)
    np.testing.assert_array_equal(found.bounds, expected.bounds)
    assert found.failures == expected.failures


@given(cases=st.integers(0, 5000), chunk_size=st.integers(1, 600))
def test_chunks_cover_a_wave_once_and_none_is_too_long(cases: int, chunk_size: int) -> None:
    chunks = chunks_of(cases, chunk_size)
    assert [case for chunk in chunks for case in chunk] == list(range(cases))
    assert all(1 <= len(chunk) <= chunk_size for chunk in chunks)
    # A wave that would be a chunk or two is shared out.
    if chunk_size <= 16 and cases >= 8:
        assert len(chunks) >= 4


@pytest.mark.parametrize(("seconds", "size"), [(0.0, 512), (0.004, 87), (0.1, 3), (0.3, 1), (20.0, 1)])
def test_chunks_take_about_a_third_of_a_second(seconds: float, size: int) -> None:
    assert chunk_size_for(seconds) == size


def test_waves_that_are_done_are_not_computed_again(store: StudyStore) -> None:
    cases, more = wave(100, -5.0), wave(7, 500.0)
    first = Crew()
    evaluate = durable(store, first)
    check_same(evaluate(cases), computed(cases))
    check_same(evaluate(more, accuracy=1e-6), computed(more))
    assert sorted(first.cases) == sorted([*cases[:, 0], *more[:, 0]])

    again = Crew()
    evaluate = durable(store, again)
    check_same(evaluate(cases), computed(cases))
    check_same(evaluate(more, accuracy=1e-6), computed(more))
    assert again.asked == []
    study = store.study("s")
    assert study is not None
    assert (study.done, study.failed) == (107, 5)
    table = table_of(store)
    check_same(table.evaluations, computed(np.concatenate([cases, more])))
    np.testing.assert_array_equal(table.numbers, np.concatenate([cases, more]))
    np.testing.assert_array_equal(table.case, np.arange(107))
    assert [case for case, _ in store.failures("s", 3)] == [0, 1, 2]


def test_study_that_was_stopped_asks_for_the_missing_chunks_only(store: StudyStore) -> None:
    class Stop(BaseException): ...

    cases = wave(300)
    asked = 0

    def stop_at_the_fifth() -> None:
        nonlocal asked
        asked += 1
        if asked == 5:
            raise Stop

    first, second = Crew(), Crew()
    with pytest.raises(Stop):
        durable(store, first, stop_at_the_fifth)(cases)
    study = store.study("s")
    assert study is not None
    assert 0 < study.done < 300
    # What is done is a table of its own, with the numbers of its cases.
    table = table_of(store)
    check_same(table.evaluations, computed(cases[table.case]))
    check_same(durable(store, second)(cases), computed(cases))
    assert sorted(first.cases + second.cases) == cases[:, 0].tolist()


def test_chunk_damaged_on_disk_is_computed_again(store: StudyStore, path: Path) -> None:
    cases = wave(64)
    durable(store, Crew())(cases)
    with closing(sqlite3.connect(path, isolation_level=None)) as other:
        other.execute("UPDATE chunk SET payload = zeroblob(length(payload)) WHERE first = 16")
    crew = Crew()
    check_same(durable(store, crew)(cases), computed(cases))
    assert min(crew.cases) == 16
    assert len(crew.asked) == 1
    study = store.study("s")
    assert study is not None
    assert study.done == 64


def test_damage_on_disk_is_not_told_as_numbers(store: StudyStore, path: Path) -> None:
    durable(store, Crew())(wave(64))
    store.finish("s", attempt_of(store), b"answer")
    with closing(sqlite3.connect(path, isolation_level=None)) as other:
        other.execute("UPDATE chunk SET payload = zeroblob(length(payload)) WHERE first = 16")
        other.execute("UPDATE chunk SET payload = substr(payload, 9) WHERE first = 32")
        other.execute("UPDATE answer SET content = x'00'")
    found = table_of(store).evaluations
    lost = [case for case, failure in found.failures.items() if failure.code == "damaged"]
    assert lost == list(np.flatnonzero(np.isnan(found.values[:, 0])))
    assert {16, 32} <= set(lost) < set(range(64))
    assert np.isnan(found.bounds[lost]).all()
    kept = [case for case in range(64) if case not in lost]
    np.testing.assert_array_equal(found.values[kept], computed(wave(64)).values[kept])
    with pytest.raises(WrongState, match="is damaged; delete the study"):
        store.answer("s")


def test_damaged_file_is_told_as_one_and_not_waited_for(store: StudyStore, path: Path) -> None:
    begun(store)
    with closing(sqlite3.connect(path, isolation_level=None)) as other:
        other.execute("UPDATE study SET columns = '[]'")
    with pytest.raises(StoreBusy, match="are damaged") as raised:
        patiently(lambda: None, store.study, "s")
    assert not raised.value.passes


def test_store_that_cannot_be_written_for_a_while_is_waited_for(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("service.studies.store._BUSY_SECONDS", 0.02)
    monkeypatch.setattr("service.studies.patience.RETRY_SECONDS", 0.02)
    with (
        closing(StudyStore(path, 1_000_000, 10)) as store,
        closing(sqlite3.connect(path, isolation_level=None)) as other,
    ):
        begun(store)
        holds = iter(range(10))

        def ask_on() -> None:
            # Asked between tries: the other process lets go after some of them.
            if other.in_transaction and next(holds) == 5:
                other.execute("ROLLBACK")

        def hold(cases: FloatArray, _: int) -> None:
            if cases[0, 0] == 16:
                other.execute("BEGIN IMMEDIATE")

        crew = Crew(trouble=hold)
        check_same(durable(store, crew, ask_on)(wave(64)), computed(wave(64)))
        assert len(crew.cases) == 64
        study = store.study("s")
        assert study is not None
        assert (study.state, study.done) == ("running", 64)
        assert next(holds) > 5


@pytest.mark.parametrize(("error", "code", "times"), [(TimeOver(), "time-limit", 1), (WorkerLost(), "process-lost", 2)])
def test_case_that_takes_its_worker_along_fails_alone(
    store: StudyStore, error: Exception, code: str, times: int
) -> None:
    crew = Crew(trouble=lambda cases, _: error if 21.0 in cases[:, 0] else None)
    cases = wave(64)
    found = durable(store, crew)(cases)
    assert {case: failure.code for case, failure in found.failures.items()} == {21: code}
    others = np.arange(64) != 21
    np.testing.assert_array_equal(found.values[others], computed(cases).values[others])
    assert np.isnan(found.values[21]).all()
    assert crew.asked.count([21.0]) == times
    study = store.study("s")
    assert study is not None
    assert (study.done, study.failed) == (64, 1)


def test_worker_lost_once_costs_no_case(store: StudyStore) -> None:
    crew = Crew(trouble=lambda cases, times: WorkerLost() if times == 1 else None)
    check_same(durable(store, crew)(wave(64)), computed(wave(64)))


def test_crew_out_of_reach_is_waited_for(store: StudyStore, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("service.studies.chunks._CREW_RETRY_SECONDS", 0.01)
    crew = Crew(trouble=lambda cases, times: CrewLost() if times < 6 else None)
    check_same(durable(store, crew)(wave(64)), computed(wave(64)))


def test_what_a_worker_raises_of_itself_ends_the_study(store: StudyStore) -> None:
    with pytest.raises(ZeroDivisionError):
        durable(store, Crew(trouble=lambda cases, times: ZeroDivisionError()))(wave(3))


def test_study_that_asks_for_other_cases_than_before_is_not_mixed_up(store: StudyStore) -> None:
    durable(store, Crew())(wave(10))
    for cases, accuracy in ((wave(11), None), (wave(10, 1.0), None), (wave(10), 1e-3)):
        with pytest.raises(NotRepeatable):
            durable(store, Crew())(cases, accuracy=accuracy)


def test_number_of_cases_is_bounded_over_all_waves(store: StudyStore) -> None:
    evaluate = durable(store, Crew())
    evaluate(wave(900))
    with pytest.raises(TooManyCases):
        evaluate(wave(101))


def test_empty_wave_is_nothing(store: StudyStore) -> None:
    assert durable(store, Crew())(wave(0)).values.shape == (0, 1)


def test_store_bounds_what_is_kept_and_reserved(path: Path) -> None:
    store = StudyStore(path, 2500, 3)
    store.accept(acceptance("a"))
    waits = store.accept(acceptance("b"))
    with pytest.raises(StoreFull, match="needs up to 1002 bytes and 500 are free"):
        store.accept(acceptance("c"))
    store.cancel("a")
    # What was kept free for it is free again.
    store.accept(acceptance("c"))
    assert store.forget("b", waits.attempt) is False
    store.cancel("b")
    assert store.forget("b", waits.attempt) is True
    assert store.study("b") is None
    store.close()


def test_store_bounds_how_many_studies_wait(path: Path) -> None:
    store = StudyStore(path, 10_000, 2)
    first = store.accept(acceptance("a"))
    store.accept(acceptance("b"))
    with pytest.raises(QueueFull, match="2 studies wait already"):
        store.accept(acceptance("c"))
    assert store.accept(acceptance("a")) == first
    store.begin("a", first.attempt)
    store.accept(acceptance("c"))
    assert [study.study_id for study in store.newest(2)] == ["c", "b"]
    assert [study.study_id for study in store.unfinished()] == ["a", "b", "c"]
    store.close()


def test_attempt_of_a_study_that_was_cancelled_since_is_not_begun(store: StudyStore) -> None:
    study = begun(store)
    store.cancel("s")
    assert store.begin("s", study.attempt) is None
    again = store.accept(acceptance("s"))
    assert again.attempt > study.attempt
    assert store.begin("s", study.attempt) is None
    assert store.begin("s", again.attempt) is not None
    # Cancelled while its answer was on the way.
    store.cancel("s")
    store.finish("s", attempt_of(store), b"answer")
    store.fail("s", attempt_of(store), "code", "Sentence.")
    over = store.study("s")
    assert over is not None
    assert (over.state, over.fault) == ("cancelled", None)
    assert store.answer("s") is None


def test_study_that_was_begun_again_is_not_forgotten_for_its_former_attempt(store: StudyStore) -> None:
    former = begun(store)
    store.cancel("s")
    latter = store.accept(acceptance("s", 16))
    # The former one is on its way to its end still, which is not that of the latter.
    store.finish("s", former.attempt, b"other answer")
    store.fail("s", former.attempt, "code", "Sentence.")
    waiting = store.study("s")
    assert waiting is not None
    assert waiting.state == "waiting"
    store.finish("s", latter.attempt, b"answer")
    assert latter.attempt > former.attempt
    assert not store.forget("s", former.attempt)
    assert store.answer("s") == b"answer"
    assert store.forget("s", latter.attempt)
    assert store.study("s") is None
    # Whoever looked at it a moment ago is told so, whatever comes next.
    for look in (lambda _: extent_of(store, latter), lambda study: store.failures(study, 20), store.question):
        with pytest.raises(UnknownStudy):
            look("s")
