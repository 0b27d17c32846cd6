"""Where the service listens and what it allows, read from the environment once: STILLFIELD_PORT=9000, and so
on.
"""

from __future__ import annotations

import os
from pathlib import Path

from pydantic import Field, PositiveFloat, PositiveInt
from pydantic_settings import BaseSettings, SettingsConfigDict

MEBIBYTE = 1024 * 1024


class Settings(BaseSettings):
    """Addresses and limits. Every limit is checked before the work it bounds begins."""

    model_config = SettingsConfigDict(env_prefix="STILLFIELD_", frozen=True, extra="ignore")

    host: str = Field("127.0.0.1", description="Address to listen on.")
    port: int = Field(8000, ge=0, le=65535, description="Port to listen on.")
    limit_concurrency: PositiveInt = Field(
        256, description="Connections served at the same time; more are turned away by the server with 503."
    )
    cors_origins: list[str] = Field(
        default_factory=list, description="Origins whose pages may call the service, as a JSON list."
    )

    store_path: Path = Field(Path("stillfield-problems.sqlite3"), description="File that keeps the stored problems.")
    store_bytes: PositiveInt = Field(
        512 * MEBIBYTE, description="Size of all stored problems together; beyond it new ones are refused."
    )

    body_bytes: PositiveInt = Field(2 * MEBIBYTE, description="Largest request body.")
    grids: PositiveInt = Field(16, description="Most grids in one request.")
    grid_points: PositiveInt = Field(2_000_000, description="Most places of all grids of one request together.")
    points: PositiveInt = Field(2_000, description="Most named points in one request.")
    convergence_points: PositiveInt = Field(16, description="Most points in one convergence request.")
    patches: PositiveInt = Field(400, description="Most patches on one face.")
    readings: PositiveInt = Field(100_000, description="Most readings on one face.")
    layers: PositiveInt = Field(100, description="Most layers of one stack.")
    sources: PositiveInt = Field(100, description="Most source boxes in one problem.")
    totals: PositiveInt = Field(200, description="Most patches and planes in one request for flux totals.")
    means: PositiveInt = Field(100, description="Most mean values in one request.")
    solved_pads: PositiveInt = Field(
        64, description="Most held pads and pads behind films on one mixed face; with all of them 64 panels each."
    )
    pads: PositiveInt = Field(400, description="Most pads in one request about pads or resistances.")

    cases: PositiveInt = Field(
        5_000, description="Most cases of one request about limits, tolerances, sizing and the like; studies take more."
    )
    study_cases: PositiveInt = Field(200_000, description="Most cases of one study.")

    cost_multiplications: PositiveFloat = Field(
        4e10, description="Most multiplications estimated for one request; about 10^9 take a second."
    )
    cases_multiplications: PositiveFloat = Field(
        2e11,
        description="Most multiplications estimated for all cases of one request. It counts more cases and more work a "
        "case than most take; the time limit ends what does take longer.",
    )
    memory_bytes: PositiveInt = Field(1024 * MEBIBYTE, description="Most working memory estimated for one request.")
    answer_bytes: PositiveInt = Field(128 * MEBIBYTE, description="Largest answer, estimated before the work.")
    time_limit_seconds: PositiveFloat = Field(30.0, description="Longest computation of one request.")

    worker_threads: PositiveInt = Field(
        default_factory=lambda: os.cpu_count() or 1, description="Computations at the same time."
    )
    queue_length: int = Field(
        32, ge=0, description="Requests that may wait for a worker; more are answered 503 with Retry-After."
    )
    studies_folder: Path = Field(
        Path("stillfield-studies"), description="Folder that keeps studies and their cases; made with the first study."
    )
    studies_bytes: PositiveInt = Field(
        1024 * MEBIBYTE, description="Size of all studies together, with what running ones may come to."
    )
    studies_running: PositiveInt = Field(2, description="Studies that run at the same time; they share the workers.")
    studies_waiting: PositiveInt = Field(
        64, description="Studies that may wait to be run; more are answered 503 with Retry-After."
    )
    studies_sent: PositiveInt = Field(
        8, description="Tables and answers of studies sent at the same time; more are answered 503 with Retry-After."
    )
    study_workers: PositiveInt = Field(
        default_factory=lambda: os.cpu_count() or 1,
        description="Processes that compute cases of studies.",
    )
    study_niceness: int = Field(
        10,
        ge=0,
        le=19,
        description="Steps of priority those processes are below the service, so that requests go first.",
    )
    study_case_seconds: PositiveFloat = Field(60.0, description="Longest computation of one case of a study.")
    study_memory_bytes: PositiveInt = Field(
        4096 * MEBIBYTE, description="Most address space of one process that computes cases; not on Windows."
    )
    cluster: str = Field(
        "", description="Address of a Dask scheduler, such as tcp://host:8786, whose workers compute studies instead."
    )

    solutions_kept: PositiveInt = Field(64, description="Prepared problems kept ready for the next request.")
    answer_cache_bytes: int = Field(
        64 * MEBIBYTE, ge=0, description="Finished answers kept for the same request asked again."
    )
