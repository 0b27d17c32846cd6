"""Questions of studies about a wall of Halden Reach, small enough to be computed in a moment."""

from __future__ import annotations

import csv
import io
from typing import Any

import httpx
import numpy as np

from service.settings import Settings
from service.studies.pool import Pool
from tests.api.halden_reach import Json, block

INSULATED = {"condition": "insulated"}


def wall(name: str = "wall") -> Json:
    """A wall that is hot on one side and cooled by a film on the other."""
    problem = block(
        **dict.fromkeys(("x_low", "x_high", "y_low", "y_high"), INSULATED),
        z_low={"condition": "held", "value": 640},
        z_high={"condition": "film", "coefficient": 200, "ambient": 24},
    )
    problem["body"]["conductivity"] = 40
    return problem | {"name": name}


def cases_of(coefficients: list[float], name: str = "wall") -> Json:
    """A study of the wall for several film coefficients."""
    return {
        "study": "cases",
        "question": {
            "problem": wall(name),
            "results": [
                {"name": "cold side", "result": "mean", "face": "z_high"},
                {"name": "loss", "result": "inflow", "face": "z_low"},
            ],
            "numbers": [{"name": "film", "at": "/problem/faces/z_high/coefficient"}],
            "cases": {"table": "list", "rows": [[value] for value in coefficients]},
        },
    }


def coefficients(count: int) -> list[float]:
    return [100.0 + 0.5 * index for index in range(count)]


def cold_side(coefficient: Any) -> Any:
    """Potential of the cold side by the resistances in series: 25 mm of 40 W/(m K), and the film."""
    wall_resistance, film_resistance = 0.025 / 40, 1 / np.asarray(coefficient)
    return 24 + (640 - 24) * film_resistance / (wall_resistance + film_resistance)


def quick(settings: Settings, workers: int = 1) -> Settings:
    """The settings with workers that do not stand back behind the other tests."""
    return settings.model_copy(update={"study_workers": workers, "study_niceness": 0})


def local_pool(workers: int = 1) -> Pool:
    return Pool(workers, Settings().study_memory_bytes, niceness=0)


async def run_to_end(client: httpx.AsyncClient, study: Json) -> Json:
    """Post a study and wait until it is over."""
    answer = await client.post("/v1/studies", json=study, headers={"Prefer": "wait=30"})
    assert answer.status_code in (200, 202), answer.text
    for _ in range(4):
        if answer.json()["ended"] is not None:
            break
        answer = await client.get(f"/v1/studies/{answer.json()['study_id']}", headers={"Prefer": "wait=30"})
    shown: Json = answer.json()
    return shown


def read_csv(text: str) -> list[list[str]]:
    return list(csv.reader(io.StringIO(text, newline="")))
