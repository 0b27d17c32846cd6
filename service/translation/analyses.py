"""All kinds of decisions by the name they have in addresses and studies."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from service.translation import best_values, calibration, limits, sensitivities, sizing, table_of_cases, tolerances
from service.translation.analysis import AnalysisCall

ANALYSES: Mapping[str, AnalysisCall[Any]] = {
    call.name: call
    for call in (
        limits.CALL,
        sensitivities.CALL,
        tolerances.CALL,
        sizing.CALL,
        best_values.CALL,
        calibration.CALL,
        table_of_cases.CALL,
    )
}
