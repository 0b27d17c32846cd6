"""Requests made up from the OpenAPI document, right and wrong: no answer fails or is unlike described."""

from __future__ import annotations

import logging
import tempfile
from pathlib import Path
from typing import Any

import pytest
import schemathesis
from hypothesis import HealthCheck, Phase, settings
from schemathesis.specs.openapi.checks import positive_data_acceptance

from service.app import create_app
from service.settings import Settings

# Small limits, so that a right request is answered at once.
SETTINGS = Settings(
    store_path=Path(":memory:"),
    studies_folder=Path(tempfile.mkdtemp()) / "studies",
    study_cases=20,
    study_workers=1,
    grid_points=2_000,
    points=20,
    convergence_points=2,
    time_limit_seconds=5,
    cost_multiplications=1e8,
    worker_threads=2,
)

CONFIG = schemathesis.Config.from_dict(
    {
        "phases": {
            # The examples have a test of their own.
            "examples": {"enabled": False},
            "coverage": {"enabled": False},
        }
    }
)

schema = schemathesis.openapi.from_asgi("/openapi.json", create_app(SETTINGS), config=CONFIG)


@schema.parametrize()
@settings(
    max_examples=80,
    deadline=None,
    derandomize=True,
    phases=[Phase.explicit, Phase.generate],
    suppress_health_check=list(HealthCheck),
)
def test_made_up_requests(case: schemathesis.Case[Any], caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.ERROR):
        # Physics is no matter of schemas: a request of the right shape may have no steady state, and gets a
        # 422.
        case.call_and_validate(excluded_checks=[positive_data_acceptance])
    assert not caplog.records
