"""`python3 -m service`, as a process of its own."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import httpx
import pytest

from service.settings import Settings

ROOT = Path(__file__).resolve().parent.parent


def start(*arguments: str, folder: Path, **settings: str) -> subprocess.Popen[str]:
    """Begin the service with these settings; its working folder is where it keeps its store."""
    own = {"PYTHONPATH": str(ROOT), **{f"STILLFIELD_{name.upper()}": text for name, text in settings.items()}}
    return subprocess.Popen(
        [sys.executable, "-m", "service", *arguments],
        cwd=folder,
        env=os.environ | own,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


@pytest.fixture
def service(tmp_path: Path) -> Iterator[tuple[subprocess.Popen[str], str]]:
    """A running service and its address, on a port that the system chose."""
    process = start(folder=tmp_path, port="0")
    assert process.stderr is not None
    said = ""
    for line in process.stderr:
        said += line
        if address := re.search(r"running on (http://\S+)", line):
            yield process, address[1]
            break
    else:
        pytest.fail(f"The service ended before it listened:\n{said}")
    process.kill()
    process.communicate()


def test_service_answers_and_ends_in_order(service: tuple[subprocess.Popen[str], str]) -> None:
    process, address = service
    answer = httpx.get(f"{address}/health/live")
    assert answer.status_code == 200
    assert "server" not in answer.headers
    process.send_signal(signal.SIGTERM)
    _, said = process.communicate(timeout=20)
    assert "Application shutdown complete" in said
    assert "Traceback" not in said


@pytest.mark.parametrize(
    ("name", "text", "sentence"),
    [
        ("port", "eighty", "STILLFIELD_PORT: Input should be a valid integer"),
        ("grid_points", "0", "STILLFIELD_GRID_POINTS: Input should be greater than 0."),
        ("cors_origins", "not JSON", "cors_origins"),
    ],
)
def test_wrong_setting_is_named_and_nothing_starts(tmp_path: Path, name: str, text: str, sentence: str) -> None:
    process = start(folder=tmp_path, **{name: text})
    _, said = process.communicate(timeout=60)
    assert process.returncode == 2
    assert sentence in said
    assert "Traceback" not in said
    assert list(tmp_path.iterdir()) == []


def test_help_lists_every_setting_and_an_unknown_option_is_refused(tmp_path: Path) -> None:
    process = start("--help", folder=tmp_path)
    printed, _ = process.communicate(timeout=60)
    assert process.returncode == 0
    for name in Settings.model_fields:
        assert f"  STILLFIELD_{name.upper()}=" in printed

    process = start("--port", "9000", folder=tmp_path)
    _, said = process.communicate(timeout=60)
    assert process.returncode == 2
    assert "--port" in said
