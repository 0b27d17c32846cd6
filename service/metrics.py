"""Counts for a scraper (/metrics) and for people (/v1/diagnostics)."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from prometheus_client import CollectorRegistry, Counter, Histogram, generate_latest
from prometheus_client.core import CounterMetricFamily, GaugeMetricFamily
from prometheus_client.registry import Collector

from service.core import CacheReport, cache_report
from service.kept import Kept, KeptReport
from service.refusals import StoreBusy
from service.studies.store import STATES
from service.studies.studies import Studies
from service.worker import Worker

# From a cached plane to the default time limit.
_SECONDS = (0.001, 0.003, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0, 30.0)


class Metrics:
    """Counts of one app. Each app has a registry of its own, so that several can live in one process."""

    def __init__(self, worker: Worker, studies: Studies, solutions: Kept[Any], answers: Kept[Any]) -> None:
        self._worker = worker
        self._studies = studies
        self._solutions = solutions
        self._answers = answers
        self._registry = CollectorRegistry()
        self._registry.register(_Live(self))
        self._requests = Counter(
            "stillfield_requests",
            "Requests answered.",
            ("method", "route", "status"),
            registry=self._registry,
        )
        self._seconds = Histogram(
            "stillfield_request_seconds",
            "Time from request to answer.",
            ("route",),
            buckets=_SECONDS,
            registry=self._registry,
        )

    def count(self, method: str, route: str, status: int, seconds: float) -> None:
        """Note one request that was answered."""
        self._requests.labels(method, route, str(status)).inc()
        self._seconds.labels(route).observe(seconds)

    def text(self) -> bytes:
        """All counts in the text form that scrapers read."""
        return generate_latest(self._registry)

    def caches(self) -> dict[str, dict[str, int]]:
        """Hits, misses, size and limit of everything that is kept for the next request."""
        reports: dict[str, CacheReport | KeptReport] = {
            **cache_report(),
            "solutions": self._solutions.report(),
            "answers": self._answers.report(),
        }
        return {
            name: {"hits": kept.hits, "misses": kept.misses, "size": kept.size, "limit": kept.limit}
            for name, kept in reports.items()
        }

    def work(self) -> dict[str, float]:
        """How busy the worker is."""
        report = self._worker.report()
        return {
            "threads": report.threads,
            "running": report.running,
            "waiting": report.waiting,
            "queue_length": report.queue_length,
            "finished": report.finished,
            "turned_away": report.turned_away,
            "interrupted": report.interrupted,
            "seconds": report.seconds,
        }

    def studies(self) -> dict[str, float] | None:
        """How many studies there are in each state, how full their store is, and what was computed for them.

        None while their store cannot be reached, which is no reason to tell nothing of the rest.
        """
        try:
            report, kept = self._studies.report(), self._studies.kept()
        except StoreBusy:
            return None
        return {
            **{state: report.counts[state] for state in STATES},
            "size": report.size,
            "limit": report.limit,
            "cases": kept.cases,
            "failed_cases": kept.failed,
            "seconds": kept.seconds,
        }


class _Live(Collector):
    """Reads caches, worker and studies at the moment of the scrape."""

    def __init__(self, metrics: Metrics) -> None:
        self._metrics = metrics

    def collect(self) -> Iterator[CounterMetricFamily | GaugeMetricFamily]:
        """The families of caches, worker and studies."""
        hits = CounterMetricFamily("stillfield_cache_hits", "Found in a cache.", labels=("cache",))
        misses = CounterMetricFamily("stillfield_cache_misses", "Not found in a cache.", labels=("cache",))
        size = GaugeMetricFamily("stillfield_cache_size", "Filling of a cache.", labels=("cache",))
        for name, cache in self._metrics.caches().items():
            hits.add_metric((name,), cache["hits"])
            misses.add_metric((name,), cache["misses"])
            size.add_metric((name,), cache["size"])
        yield from (hits, misses, size)
        work = self._metrics.work()
        for name in ("running", "waiting"):
            yield GaugeMetricFamily(f"stillfield_work_{name}", f"Computations {name}.", work[name])
        for name in ("finished", "turned_away", "interrupted"):
            words = name.replace("_", " ")
            yield CounterMetricFamily(f"stillfield_work_{name}", f"Computations {words}.", work[name])
        yield CounterMetricFamily("stillfield_work_seconds", "Seconds spent computing.", work["seconds"])
        studies = self._metrics.studies()
        if studies is None:
            return
        states = GaugeMetricFamily("stillfield_studies", "Studies by their state.", labels=("state",))
        for state in STATES:
            states.add_metric((state,), studies[state])
        yield states
        yield GaugeMetricFamily("stillfield_studies_size", "Bytes of all studies.", studies["size"])
        yield CounterMetricFamily("stillfield_study_cases", "Cases computed for studies.", studies["cases"])
        yield CounterMetricFamily("stillfield_study_failed_cases", "Cases that failed.", studies["failed_cases"])
        yield CounterMetricFamily("stillfield_study_seconds", "Seconds workers spent on cases.", studies["seconds"])
