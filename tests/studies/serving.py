"""The service as a process of its own that can be killed, and what it left behind."""

from __future__ import annotations

import os
import re
import signal
import sqlite3
import subprocess
import sys
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

import httpx

ROOT = Path(__file__).resolve().parent.parent.parent


@dataclass
class Served:
    """A running service in a folder, which keeps everything it stores."""

    process: subprocess.Popen[str]
    client: httpx.Client

    def kill(self) -> str:
        """End it without a warning, as a crash of the machine would; what it and its workers still said."""
        self.client.close()
        self.process.send_signal(signal.SIGKILL)
        _, said = self.process.communicate()
        return said

    def stop(self) -> str:
        """Ask it to end; what it said meanwhile."""
        self.client.close()
        self.process.send_signal(signal.SIGTERM)
        _, said = self.process.communicate(timeout=60)
        return said

    def cases_computed(self) -> int:
        """Cases of studies computed by this process so far."""
        state = self.client.get("/v1/diagnostics").json()
        return int(state["studies"]["cases"])


def serve(folder: Path, **settings: object) -> Served:
    """Start the service in a folder, on a port that the system chooses."""
    given = {"port": 0, "study_niceness": 0, "study_workers": 2} | settings
    own = {f"STILLFIELD_{name.upper()}": str(value) for name, value in given.items()}
    process = subprocess.Popen(
        [sys.executable, "-m", "service"],
        cwd=folder,
        env=os.environ | own | {"PYTHONPATH": str(ROOT)},
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        text=True,
    )
    assert process.stderr is not None
    said = ""
    for line in process.stderr:
        said += line
        if address := re.search(r"running on (http://\S+)", line):
            return Served(process, httpx.Client(base_url=address[1], timeout=60, trust_env=False))
    raise AssertionError(f"The service ended before it listened:\n{said}")


def cases_stored(folder: Path) -> int:
    """Finished cases in the store of a service that is not running."""
    with closing(sqlite3.connect(folder / "stillfield-studies" / "studies.sqlite3")) as store:
        return int(store.execute("SELECT COALESCE(SUM(cases), 0) FROM chunk").fetchone()[0])


def children_of(process: int) -> list[int]:
    """The processes that a process has started."""
    return [
        int(folder.name) for folder in Path("/proc").iterdir() if folder.name.isdigit() and _parent(folder) == process
    ]


def _parent(folder: Path) -> int:
    try:
        status = (folder / "status").read_text()
    except OSError:
        return 0
    found = re.search(r"^PPid:\s+(\d+)", status, flags=re.MULTILINE)
    return int(found[1]) if found else 0


def is_alive(process: int) -> bool:
    """Whether a process runs; one that has ended and waits to be noticed does not."""
    try:
        status = Path(f"/proc/{process}/status").read_text()
    except OSError:
        return False
    return re.search(r"^State:\s+[ZX]", status, flags=re.MULTILINE) is None
