"""A client of an app with test settings, and a check that any error document has to pass."""

from __future__ import annotations

import os
from collections.abc import AsyncIterator
from pathlib import Path

import httpx
import pytest

from service.settings import Settings
from tests.api.client import open_client


@pytest.fixture(autouse=True)
def _no_settings_from_outside(monkeypatch: pytest.MonkeyPatch) -> None:
    """Tests say what they need; the environment of whoever runs them does not."""
    for name in [name for name in os.environ if name.startswith("STILLFIELD_")]:
        monkeypatch.delenv(name)


@pytest.fixture
def anyio_backend() -> str:
    """Coroutines of tests run in asyncio, as those of the service do."""
    return "asyncio"


@pytest.fixture
def settings(tmp_path: Path) -> Settings:
    """Settings of a small service with a store of its own."""
    return Settings(store_path=tmp_path / "problems.sqlite3", studies_folder=tmp_path / "studies", worker_threads=2)


@pytest.fixture
async def client(settings: Settings) -> AsyncIterator[httpx.AsyncClient]:
    """A client of a service that was just started."""
    async with open_client(settings) as opened:
        yield opened
