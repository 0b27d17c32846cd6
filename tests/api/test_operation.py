"""Health, diagnostics, counts and the headers of every answer."""

from __future__ import annotations

from pathlib import Path

import httpx
import pytest
from prometheus_client.parser import text_string_to_metric_families

from service import __version__
from service.models.operation import Diagnostics
from service.settings import Settings
from service.store import ProblemStore
from tests.api.client import check_problem_document, open_client
from tests.api.halden_reach import ask_points, slab


@pytest.mark.anyio
async def test_started_service_is_live_and_ready(client: httpx.AsyncClient) -> None:
    for path in ("/health/live", "/health/ready"):
        answer = await client.get(path)
        assert (answer.status_code, answer.json()) == (200, {"status": "ok"})


@pytest.mark.anyio
async def test_service_whose_store_fails_lives_but_is_not_ready(
    client: httpx.AsyncClient, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(_: ProblemStore) -> None:
        raise OSError("no disk")

    monkeypatch.setattr(ProblemStore, "report", fail)
    assert (await client.get("/health/live")).status_code == 200
    document = check_problem_document(await client.get("/health/ready"), 503)
    assert "no disk" not in document["detail"]


@pytest.mark.anyio
async def test_diagnostics_show_caches_work_and_store(client: httpx.AsyncClient, settings: Settings) -> None:
    await client.post("/v1/problems", json=slab())
    state = (await client.get("/v1/diagnostics")).json()
    Diagnostics.model_validate(state)
    assert state["version"] == __version__
    assert {"answers", "solutions", "eigenvalues", "eigen_integrals"} <= set(state["caches"])
    assert state["work"]["threads"] == settings.worker_threads
    assert state["store"]["problems"] == 1
    assert 0 < state["store"]["size"] < state["store"]["limit"]


@pytest.mark.anyio
async def test_counts_can_be_scraped(client: httpx.AsyncClient) -> None:
    await client.post("/v1/fields", json=ask_points(slab(), [1, 1, 1]))
    await client.post("/v1/fields", json={})
    await client.get("/no/such/address")
    text = (await client.get("/metrics")).text
    samples = {
        (sample.name, tuple(sorted(sample.labels.items()))): sample.value
        for family in text_string_to_metric_families(text)
        for sample in family.samples
    }
    counted = {
        (dict(labels)["route"], dict(labels)["status"]): value
        for (name, labels), value in samples.items()
        if name == "stillfield_requests_total"
    }
    assert counted[("/v1/fields", "200")] == 1
    assert counted[("/v1/fields", "422")] == 1
    # Addresses that do not exist share one name, or a scan would make as many series as it likes.
    assert counted[("other", "404")] == 1
    assert samples[("stillfield_work_finished_total", ())] == 1


@pytest.mark.anyio
@pytest.mark.parametrize("path", ["/health/live", "/docs", "/openapi.json", "/nowhere", "/v1/diagnostics"])
async def test_every_answer_has_the_security_headers(client: httpx.AsyncClient, path: str) -> None:
    headers = (await client.get(path)).headers
    assert headers["x-content-type-options"] == "nosniff"
    assert headers["referrer-policy"] == "no-referrer"
    assert "default-src 'none'" in headers["content-security-policy"]


@pytest.mark.anyio
async def test_other_origins_are_let_in_only_by_setting(settings: Settings) -> None:
    asking = {"Origin": "https://desk.example", "Access-Control-Request-Method": "POST"}
    async with open_client(settings) as client:
        answer = await client.options("/v1/fields", headers=asking)
        assert "access-control-allow-origin" not in answer.headers
    allowed = settings.model_copy(update={"cors_origins": ["https://desk.example"]})
    async with open_client(allowed) as client:
        answer = await client.options("/v1/fields", headers=asking)
        assert answer.headers["access-control-allow-origin"] == "https://desk.example"


def test_settings_come_from_the_environment(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("STILLFIELD_PORT", "9000")
    monkeypatch.setenv("STILLFIELD_STORE_PATH", str(tmp_path / "here.sqlite3"))
    monkeypatch.setenv("STILLFIELD_CORS_ORIGINS", '["https://desk.example"]')
    settings = Settings()
    assert settings.port == 9000
    assert settings.store_path == tmp_path / "here.sqlite3"
    assert settings.cors_origins == ["https://desk.example"]


@pytest.mark.parametrize(("name", "value"), [("PORT", "99999"), ("BODY_BYTES", "0"), ("WORKER_THREADS", "-1")])
def test_impossible_settings_are_refused(monkeypatch: pytest.MonkeyPatch, name: str, value: str) -> None:
    monkeypatch.setenv(f"STILLFIELD_{name}", value)
    with pytest.raises(ValueError, match=name.lower()):
        Settings()


@pytest.mark.anyio
async def test_store_that_cannot_be_opened_is_named_at_the_start(settings: Settings, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way")
    elsewhere = settings.model_copy(update={"store_path": tmp_path / "file" / "problems.sqlite3"})
    with pytest.raises(RuntimeError, match="set STILLFIELD_STORE_PATH to a file that can be written"):
        async with open_client(elsewhere):
            pass
