"""All kinds of decisions by the name they have in addresses and studies."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from service.translation import limits, table_of_cases
from service.translation.analysis import AnalysisCall

ANALYSES: Mapping[str, AnalysisCall[Any]] = {call.name: call for call in (limits.CALL, table_of_cases.CALL)}
