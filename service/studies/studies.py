"""All studies of one app: accepted, run, cancelled, resumed after a crash, forgotten."""

from __future__ import annotations

import importlib
import json
import logging
import sqlite3
import threading
import time
import weakref
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from service import __version__
from service.core.errors import CoreError
from service.core.stopping import on_behalf_of
from service.refusals import Refusal, StoreBusy, UnknownStudy, WrongState
from service.settings import Settings
from service.studies.answers import pack_answer
from service.studies.chunk_work import OtherRelease, pack_work
from service.studies.chunks import DurableEvaluate, TooManyCases
from service.studies.crew import Crew
from service.studies.engine import Engine, Stopping
from service.studies.patience import patiently
from service.studies.pool import Pool
from service.studies.reading import KeepGoing, acceptance, read_study
from service.studies.store import DAMAGED, UNKNOWN, Kept, NotRepeatable, StudiesReport, Study, StudyStore
from service.translation.solving import Solver

logger = logging.getLogger("service")

_STORE = "studies.sqlite3"
_ENGINE = "engine.sqlite3"
_CLAIM = "in-use.sqlite3"
_OUT_OF_REACH = "The studies cannot be reached: another service has them, or their folder cannot be written."
# Studies that were told to stop do so between two steps of the solver.
_END_SECONDS = 20.0
# How long one that is to be forgotten is waited for to hand in its last chunks.
_LAST_CHUNKS_SECONDS = 5.0


@dataclass(eq=False)
class _Run:
    """What the attempts of one study share: they run one after the other. cancelled: the last one that has to end."""

    turn: threading.Lock = field(default_factory=threading.Lock)
    cancelled: int = 0


class _Cancelled(BaseException):
    """The study is not wanted any more; past whatever an analysis catches."""


class Studies:
    """Studies of one app. Nothing is opened, started or written before the first study."""

    def __init__(self, settings: Settings, solver: Solver) -> None:
        self._settings = settings
        self._solver = solver
        self._folder = settings.studies_folder
        self._lock = threading.Lock()
        self._store: StudyStore | None = None
        self._claim: sqlite3.Connection | None = None
        self._engine = Engine(self._folder / _ENGINE, settings.studies_running, self._run)
        self._crew = _crew_of(settings)
        self._said = ""
        self._stopping = threading.Event()
        # Of studies that somebody is at work on.
        self._runs: weakref.WeakValueDictionary[str, _Run] = weakref.WeakValueDictionary()

    def resume(self) -> None:
        """Go on with studies that were not finished when the service ended. Without any nothing is started."""
        if not (self._folder / _STORE).is_file():
            return
        try:
            store = self._opened()
            unfinished = store.unfinished()
        except StoreBusy:
            # Another service runs these studies and goes on with them, or nobody can; other questions can be answered.
            return
        for study in unfinished:
            if study.release == __version__:
                self._engine.submit(study.study_id, study.attempt)
            else:
                message = f"The study was begun by release {study.release} of the service; post it again to this one."
                store.fail(study.study_id, study.attempt, "other-release", message)

    def accept(self, name: str, question: Any, keep_going: KeepGoing) -> Study:
        """The study of a question, which is begun unless it is known and was neither cancelled nor failed.

        Raises what reading the question raises, TooCostly, QueueFull, StoreFull and StoreBusy.
        """
        read = read_study(name, question, self._solver, self._settings, keep_going)
        store = self._opened()
        study = store.study(read.study_id)
        if study is None or study.state in ("cancelled", "failed"):
            study = store.accept(acceptance(read, self._settings, keep_going))
        if study.state == "waiting":
            self._engine.submit(study.study_id, study.attempt)
        return study

    def study(self, study_id: str) -> Study:
        """A study as it stands. Raises UnknownStudy."""
        return _known(self._opened().study(study_id))

    def newest(self, most: int) -> list[Study]:
        """The studies that came in last, the newest first."""
        return self._opened().newest(most) if self._has_store() else []

    def cancel(self, study_id: str) -> Study:
        """The study, which does not go on. Raises UnknownStudy."""
        study = _known(self._opened().cancel(study_id))
        if study.state == "cancelled":
            self._run_of(study_id).cancelled = study.attempt
        return study

    def forget(self, study_id: str) -> None:
        """Drop a study that is over, with all its cases. Raises UnknownStudy and WrongState."""
        study = self.study(study_id)
        if not study.is_over:
            raise WrongState(f"The study is {study.state}; cancel it first.")
        run = self._run_of(study_id)
        # One that was cancelled a moment ago still hands in its last chunks.
        if not run.turn.acquire(timeout=_LAST_CHUNKS_SECONDS):
            raise WrongState("The study was cancelled and has not come to its end yet; try again in a moment.")
        try:
            # If it was begun again meanwhile, that is another attempt, which nobody wants to have dropped.
            if not self._opened().forget(study_id, study.attempt):
                raise WrongState("The study was begun again meanwhile; cancel it first.")
        finally:
            run.turn.release()

    def answer(self, study_id: str) -> bytes:
        """The answer of a finished study, packed. Raises UnknownStudy and WrongState."""
        study = self.study(study_id)
        content = self._opened().answer(study_id)
        if content is None:
            raise WrongState(f"The study is {study.state}; it has an answer when it is finished.")
        return content

    @property
    def store(self) -> StudyStore:
        """Tables and failures of the studies."""
        return self._opened()

    @property
    def crew(self) -> Crew:
        """Who computes the chunks."""
        return self._crew

    def report(self) -> StudiesReport:
        """What the store holds; also shows that it answers."""
        if not self._has_store():
            return StudiesReport.empty(self._settings.studies_bytes)
        return self._opened().report()

    def kept(self) -> Kept:
        """What was computed since the start."""
        return Kept() if self._store is None else self._store.kept

    def close(self) -> None:
        """Stop at the next step and let go of processes and files. What is not finished goes on with the next start."""
        self._stopping.set()
        end = time.monotonic() + _END_SECONDS
        for run in list(self._runs.values()):
            if run.turn.acquire(timeout=max(0.0, end - time.monotonic())):
                run.turn.release()
        self._engine.close()
        self._crew.close()
        with self._lock:
            self._let_go()

    def _let_go(self) -> None:
        for held in (self._store, self._claim):
            if held is not None:
                held.close()
        self._store = self._claim = None

    def _has_store(self) -> bool:
        return self._store is not None or (self._folder / _STORE).is_file()

    def _opened(self) -> StudyStore:
        """The store, opened when it is first needed. Raises StoreBusy while another process has it."""
        with self._lock:
            if self._store is None:
                try:
                    self._folder.mkdir(parents=True, exist_ok=True)
                    self._claim = _claimed(self._folder / _CLAIM)
                    settings = self._settings
                    self._store = StudyStore(self._folder / _STORE, settings.studies_bytes, settings.studies_waiting)
                except (OSError, sqlite3.Error) as error:
                    # Where that is is for whoever runs the service, and not for its clients.
                    if str(error) != self._said:
                        logger.error("The studies in %s cannot be reached (%s).", self._folder, error)
                    self._said = str(error)
                    self._let_go()
                    if isinstance(error, OSError | sqlite3.OperationalError):
                        raise StoreBusy(_OUT_OF_REACH) from error
                    raise StoreBusy(DAMAGED, passes=False) from error
            return self._store

    def _run_of(self, study_id: str) -> _Run:
        with self._lock:
            return self._runs.setdefault(study_id, _Run())

    def _run(self, study_id: str, attempt: int) -> None:
        """Run one attempt of a study to its end, in a thread of the engine."""
        run = self._run_of(study_id)

        def ask_on() -> None:
            if self._stopping.is_set():
                raise Stopping
            if run.cancelled >= attempt:
                raise _Cancelled

        try:
            ask_on()
            with run.turn:
                self._attempt(study_id, attempt, ask_on)
        except _Cancelled:
            pass
        except StoreBusy as error:
            logger.error("Study %s stands still.", study_id, exc_info=error)

    def _attempt(self, study_id: str, attempt: int, ask_on: KeepGoing) -> None:
        store = self._opened()
        study = patiently(ask_on, store.begin, study_id, attempt)
        if study is None:
            return
        try:
            patiently(ask_on, store.finish, study_id, attempt, self._answer(study, store, ask_on))
        except Exception as error:
            if not isinstance(error, CoreError | Refusal | TooManyCases | NotRepeatable | OtherRelease):
                logger.error("Study %s failed.", study_id, exc_info=error)
            patiently(ask_on, store.fail, study_id, attempt, *_fault_of(error))

    def _answer(self, study: Study, store: StudyStore, ask_on: KeepGoing) -> bytes:
        settings = self._settings
        content = json.loads(patiently(ask_on, store.question, study.study_id))
        read = patiently(ask_on, read_study, study.name, content, self._solver, settings, ask_on)
        # A study has no client who waits: its cases have a time of their own.
        in_study = settings.model_copy(update={"time_limit_seconds": settings.study_case_seconds})
        evaluate = DurableEvaluate(
            study,
            pack_work(read.analysis.plan, in_study),
            store,
            self._crew,
            case_seconds=settings.study_case_seconds,
            most_cases=settings.study_cases,
            ask_on=ask_on,
        )
        with on_behalf_of(ask_on):
            return pack_answer(read.analysis.answer(evaluate))


_CODES: dict[type[Exception], str] = {
    TooManyCases: "too-many-cases",
    NotRepeatable: "not-repeatable",
    OtherRelease: "other-release",
    StoreBusy: "store-damaged",
}


def _fault_of(error: Exception) -> tuple[str, str]:
    """Why a study cannot go on: a short word for programs, and a sentence."""
    if type(error) in _CODES:
        return _CODES[type(error)], str(error)
    if isinstance(error, Refusal):
        sentences = " ".join(issue.detail for issue in error.issues)
        return "refused", f"{error.detail} {sentences}".strip()
    if isinstance(error, CoreError):
        return "not-solved", error.message
    return "internal-error", "Something failed inside the service; the log has more."


def _known(study: Study | None) -> Study:
    if study is None:
        raise UnknownStudy(UNKNOWN)
    return study


def _crew_of(settings: Settings) -> Crew:
    """Processes of this machine, or the cluster of the settings. Raises RuntimeError without the packages for one."""
    if not settings.cluster:
        return Pool(settings.study_workers, settings.study_memory_bytes, settings.study_niceness)
    try:
        # They belong to the extra `cluster`, which most do without.
        module = importlib.import_module("service.studies.cluster")
    except ImportError as error:
        raise RuntimeError(
            f"STILLFIELD_CLUSTER is set and {error.name} is not installed; install what service/cluster.lock lists."
        ) from None
    crew: Crew = module.Cluster(settings.cluster)
    return crew


def _claimed(path: Path) -> sqlite3.Connection:
    """A lock on the folder that ends with this process, however that ends."""
    connection = sqlite3.connect(path, timeout=0.0, isolation_level=None, check_same_thread=False)
    try:
        connection.execute("BEGIN EXCLUSIVE")
    except BaseException:
        connection.close()
        raise
    return connection
