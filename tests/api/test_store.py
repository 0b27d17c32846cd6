"""The store of problems."""

from __future__ import annotations

import sqlite3
import threading
from pathlib import Path

import pytest

from service.refusals import StoreBusy, StoreFull
from service.store import ProblemStore


def test_content_comes_back_after_the_file_was_closed(tmp_path: Path) -> None:
    path = tmp_path / "deep" / "problems.sqlite3"
    store = ProblemStore(path, 1_000)
    assert store.put("a", b"content") is True
    assert store.put("a", b"content") is False
    store.close()
    reopened = ProblemStore(path, 1_000)
    assert reopened.get("a") == b"content"
    assert reopened.get("b") is None
    reopened.close()


def test_full_store_refuses_and_stays_whole(tmp_path: Path) -> None:
    store = ProblemStore(tmp_path / "problems.sqlite3", 10)
    store.put("a", b"123456")
    with pytest.raises(StoreFull, match="needs 5 bytes and 4 are free"):
        store.put("b", b"12345")
    assert store.put("a", b"123456") is False
    assert store.put("c", b"1234") is True
    report = store.report()
    assert (report.problems, report.size, report.limit) == (2, 10, 10)
    store.close()


def test_two_stores_on_one_file_and_many_threads_agree(tmp_path: Path) -> None:
    stores = [ProblemStore(tmp_path / "problems.sqlite3", 100_000) for _ in range(2)]
    new: list[bool] = []

    def put_all(store: ProblemStore) -> None:
        new.extend(store.put(f"{number:03}", b"x" * 10) for number in range(50))

    threads = [threading.Thread(target=put_all, args=(stores[number % 2],)) for number in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert new.count(True) == 50
    assert [store.report().problems for store in stores] == [50, 50]
    for store in stores:
        store.close()


def test_store_held_by_another_process_is_busy_and_not_lost(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("service.store._BUSY_SECONDS", 0.05)
    store = ProblemStore(tmp_path / "problems.sqlite3", 1_000)
    other = sqlite3.connect(tmp_path / "problems.sqlite3", isolation_level=None)
    other.execute("BEGIN EXCLUSIVE")
    with pytest.raises(StoreBusy, match="try again later"):
        store.put("a", b"content")
    other.execute("ROLLBACK")
    other.close()
    assert store.put("a", b"content") is True
    store.close()
