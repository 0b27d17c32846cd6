"""Worker processes: what they are asked comes back, and what they cannot do costs one chunk."""

from __future__ import annotations

import os
import pickle
import signal
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from service.settings import Settings
from service.studies.chunk_work import OtherRelease, evaluate_chunk, pack_work
from service.studies.crew import CrewLost, WorkerLost
from service.studies.pool import Pool
from service.translation.cases import CasePlan
from tests.studies.asking import cases_of, local_pool, wall
from tests.studies.serving import children_of

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="kills as POSIX systems do")

PLAN = CasePlan({"problem": wall(), "results": cases_of([1.0])["question"]["results"]}, (), (), (), 2)
CASES = np.zeros((2, 0))


@pytest.fixture
def pool() -> Iterator[Pool]:
    opened = local_pool()
    yield opened
    opened.close()


def kill_workers() -> None:
    """Kill the workers among the processes that this one has started."""
    for process in children_of(os.getpid()):
        if b"spawn_main" in Path(f"/proc/{process}/cmdline").read_bytes():
            os.kill(process, signal.SIGKILL)


def test_worker_computes_what_this_process_computes_and_its_loss_is_told(pool: Pool) -> None:
    work = pack_work(PLAN, Settings())
    found = pool.submit(work, CASES, None, 30.0).result(timeout=120)
    here = evaluate_chunk(work, CASES, None)
    np.testing.assert_array_equal(found.evaluations.values, here.evaluations.values)
    np.testing.assert_array_equal(found.evaluations.bounds, here.evaluations.bounds)
    assert found.seconds > 0

    # Work that cannot be read fails as what it is, and the worker lives on.
    broken = pool.submit(pickle.dumps(("0", PLAN, Settings())), CASES, None, 30.0)
    with pytest.raises(OtherRelease):
        broken.result(timeout=60)

    started = pool.submit(work, np.zeros((100_000, 0)), None, 600.0)
    time.sleep(0.5)
    kill_workers()
    with pytest.raises(WorkerLost):
        started.result(timeout=60)
    assert pool.submit(work, CASES, None, 30.0).result(timeout=120).evaluations.failures == {}

    # A worker that is killed while it waits for work takes the lock of its queue along: the pool is made anew.
    time.sleep(0.5)
    kill_workers()
    for _ in range(100):
        try:
            again = pool.submit(work, CASES, None, 30.0).result(timeout=120)
            break
        except (CrewLost, WorkerLost):
            time.sleep(0.1)
    np.testing.assert_array_equal(again.evaluations.values, here.evaluations.values)
