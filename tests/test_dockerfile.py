"""The Dockerfile, as far as it can be tried without a container engine."""

from __future__ import annotations

import fnmatch
import http.server
import json
import os
import re
import subprocess
import sys
import threading
from pathlib import Path

import pytest

from service.settings import Settings

ROOT = Path(__file__).resolve().parent.parent
TEXT = re.sub(r"\s*\\\n\s*", " ", (ROOT / "Dockerfile").read_text(encoding="utf-8"))


def instructions(name: str) -> list[str]:
    """The arguments of each instruction of this name, in order."""
    return re.findall(rf"^{name} (.*)$", TEXT, flags=re.MULTILINE)


def environment() -> dict[str, str]:
    return dict(pair.split("=", 1) for line in instructions("ENV") for pair in line.split())


def test_both_stages_stand_on_the_same_base() -> None:
    bases = {line.split()[0] for line in instructions("FROM")}
    assert len(bases) == 1
    assert re.fullmatch(r"python:3\.\d+-slim-\w+", bases.pop())
    assert len(instructions("FROM")) == 2


def test_settings_in_the_image_are_settings_of_the_service(monkeypatch: pytest.MonkeyPatch) -> None:
    given = {name: value for name, value in environment().items() if name.startswith("STILLFIELD_")}
    assert {name.removeprefix("STILLFIELD_").lower() for name in given} <= set(Settings.model_fields)
    for name, value in given.items():
        monkeypatch.setenv(name, value)
    settings = Settings()
    assert settings.host == "0.0.0.0"
    assert settings.port == int(*instructions("EXPOSE"))
    assert str(settings.store_path.parent) == instructions("VOLUME")[0] == "/data"
    assert settings.studies_folder.parent == settings.store_path.parent


def test_service_runs_without_root_and_with_one_thread_for_linear_algebra() -> None:
    assert re.fullmatch(r"[1-9]\d{3,}:[1-9]\d{3,}", instructions("USER")[-1])
    assert environment()["OPENBLAS_NUM_THREADS"] == environment()["OMP_NUM_THREADS"] == "1"
    assert json.loads(instructions("CMD")[-1]) == ["python", "-m", "service"]


def test_what_is_copied_is_there_and_is_sent_to_the_builder() -> None:
    # What is installed: the packages of the service, or by request those of a cluster.
    assert instructions("ARG") == ["LOCK=service/requirements.lock"]
    locks = ["service/requirements.lock", "service/cluster.lock"]
    copied = [line.split()[0] for line in instructions("COPY") if not line.startswith("--from")]
    assert {"service", "openapi_examples", "${LOCK}"} == set(copied)
    sources = [*(source for source in copied if source != "${LOCK}"), *locks]
    ignore = (ROOT / ".dockerignore").read_text(encoding="utf-8").splitlines()
    assert "*" in ignore
    sent = [line.removeprefix("!") for line in ignore if line.startswith("!")]
    for source in sources:
        assert (ROOT / source).exists()
        assert any(fnmatch.fnmatch(source, f"{pattern}*") for pattern in sent)


@pytest.mark.parametrize(("status", "healthy"), [(200, True), (503, False)])
def test_health_check_asks_the_service_and_no_proxy(status: int, healthy: bool) -> None:
    class Answer(http.server.BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            self.send_response(status if self.path == "/health/live" else 404)
            self.end_headers()

        def log_request(self, code: object = "-", size: object = "-") -> None:
            """Keep quiet."""

    command = json.loads(instructions("HEALTHCHECK")[0].partition("CMD ")[2])
    assert command[0] == "python"
    with http.server.HTTPServer(("127.0.0.1", 0), Answer) as server:
        threading.Thread(target=server.serve_forever, daemon=True).start()
        given = os.environ | {
            "STILLFIELD_PORT": str(server.server_port),
            "http_proxy": "http://127.0.0.1:1",
            "no_proxy": "",
        }
        outcome = subprocess.run([sys.executable, *command[1:]], env=given, capture_output=True, check=False)
        server.shutdown()
    assert (outcome.returncode == 0) is healthy, outcome.stderr
