"""Every file in openapi_examples/ is sent and its answer compared.

Two answers to one question agree within the error bounds both state. What is evidence and not answer, such as
the number of terms that were summed, may change with every release and is compared in kind only.
"""

from __future__ import annotations

import json
from typing import Any

import httpx
import pytest

from service.models.base import Model
from service.models.best_values_answer import BestValuesAnswer
from service.models.calibration_answer import CalibrationAnswer
from service.models.cases_answer import CasesAnswer
from service.models.convergence_answer import ConvergenceAnswer
from service.models.fields_answer import FieldsAnswer
from service.models.flux_totals_answer import FluxTotalsAnswer
from service.models.limits_answer import LimitsAnswer
from service.models.operation import ProblemAnswer
from service.models.pads_answer import PadsAnswer
from service.models.reach_answer import ReachAnswer
from service.models.resistances_answer import ResistancesAnswer
from service.models.sensitivities_answer import SensitivitiesAnswer
from service.models.sizing_answer import SizingAnswer
from service.models.studies import StudyAnswer
from service.models.tolerances_answer import TolerancesAnswer
from service.openapi import load_examples

pytestmark = pytest.mark.anyio

EXAMPLES = load_examples()

MODELS: dict[str, type[Model]] = {
    "/v1/problems": ProblemAnswer,
    "/v1/fields": FieldsAnswer,
    "/v1/flux-totals": FluxTotalsAnswer,
    "/v1/convergence": ConvergenceAnswer,
    "/v1/pads": PadsAnswer,
    "/v1/resistances": ResistancesAnswer,
    "/v1/reach": ReachAnswer,
    "/v1/limits": LimitsAnswer,
    "/v1/sensitivities": SensitivitiesAnswer,
    "/v1/tolerances": TolerancesAnswer,
    "/v1/cases": CasesAnswer,
    "/v1/studies": StudyAnswer,
    "/v1/sizing": SizingAnswer,
    "/v1/best-values": BestValuesAnswer,
    "/v1/calibration": CalibrationAnswer,
}

# A number may differ by what stands beside it under these.
BOUNDS = ("error_bound", "error_bounds", "error_estimate", "error_estimates")
EVIDENCE = {
    "agreement",
    "agreement_bound",
    "checked_places",
    "checked_entries",
    "terms_needed",
    "time_nodes",
    "time_steps",
    "series",
    "series_terms",
    "products",
    "cost_ratio",
    "residual",
    "steps",
    # The clock.
    "created",
}
# What a search for best values determines only to where its goal is flat, which has an estimate beside it, and how many
# cases searches and sizings take, which may hang on a last digit. What readings say comes from derivatives and is
# compared to five digits by its own tests.
SEARCHED = {
    "/best_values": {"numbers", "results", "limits", "apart", "searches", "case_count", "failed_count"},
    "/sizing": {"case_count"},
    "/calibration": {
        "unknowns",
        "correlation",
        "smooth_map",
        "readings",
        "results",
        "consistency",
        "coverage_factor",
        "case_count",
    },
}


def check_alike(found: Any, expected: Any, where: str = "", bound: float = 0.0) -> None:
    """Fail unless two answers have one shape and their numbers agree within the bounds stated beside them."""
    if isinstance(expected, dict):
        assert list(found) == list(expected), where
        stated = [
            bound,
            *(largest(answer[name]) for answer in (found, expected) for name in expected if name.endswith(BOUNDS)),
        ]
        for key in expected:
            is_evidence = key in EVIDENCE or key.endswith(BOUNDS)
            is_evidence |= any(where.startswith(call) and key in keys for call, keys in SEARCHED.items())
            if is_evidence or (
                key == "at" and (where.startswith(("/extremes", "/reach", "/results")) or where.endswith("/largest"))
            ):
                # An extreme's value is determined, its place only to where the field is flat within the bound.
                assert type(found[key]) is type(expected[key]), f"{where}/{key}"
            else:
                check_alike(found[key], expected[key], f"{where}/{key}", 2 * max(stated))
    elif isinstance(expected, list):
        assert len(found) == len(expected), where
        for index, pair in enumerate(zip(found, expected, strict=True)):
            check_alike(*pair, f"{where}/{index}", bound)
    elif isinstance(expected, float):
        # Coordinates and the like have no bound; they are the same up to rounding.
        assert found == pytest.approx(expected, rel=1e-12, abs=bound), where
    else:
        assert found == expected, where


def largest(bounds: Any) -> float:
    """The largest of nested bounds, 0 where there is none."""
    if isinstance(bounds, list):
        return max(map(largest, bounds), default=0.0)
    return float(bounds or 0.0)


def test_there_are_examples_of_every_call_and_every_potential() -> None:
    assert len(EXAMPLES) >= 8
    assert {example["path"] for example in EXAMPLES.values()} == set(MODELS)
    assert {example["method"] for example in EXAMPLES.values()} == {"POST"}
    asked = [example["request"].get("question", example["request"]) for example in EXAMPLES.values()]
    potentials = {question.get("problem", question)["potential"] for question in asked}
    assert potentials == {"temperature", "electric_potential", "concentration", "hydraulic_head"}


@pytest.mark.parametrize("name", EXAMPLES)
async def test_example_is_answered_as_it_says(client: httpx.AsyncClient, name: str) -> None:
    example = EXAMPLES[name]
    assert set(example) == {"summary", "description", "method", "path", "request", "answer"}
    answer = await client.post(example["path"], json=example["request"])
    assert answer.status_code in (200, 201, 202), answer.text
    MODELS[example["path"]].model_validate(answer.json())
    check_alike(answer.json(), with_id_of(answer.json(), example["answer"]))


def with_id_of(found: Any, expected: Any) -> Any:
    """What is expected with the id that the study has in this release, which its name depends on."""
    if "study_id" not in expected:
        return expected
    return json.loads(json.dumps(expected).replace(expected["study_id"], found["study_id"]))


def test_answers_that_differ_by_more_than_their_bounds_would_be_found() -> None:
    expected = {"points": [{"at": [1.0], "potential": 5.0, "error_bound": 1e-6, "flux": {"x": None}}]}
    check_alike(expected, expected)
    within = {"points": [{"at": [1.0], "potential": 5.0 + 1.9e-6, "error_bound": 1e-6, "flux": {"x": None}}]}
    check_alike(within, expected)
    for other in (
        {"at": [1.0], "potential": 5.0 + 3e-6, "error_bound": 1e-6, "flux": {"x": None}},
        {"at": [1.1], "potential": 5.0, "error_bound": 1e-6, "flux": {"x": None}},
        {"at": [1.0], "potential": 5.0, "error_bound": None, "flux": {"x": None}},
        {"at": [1.0], "potential": 5.0, "error_bound": 1e-6, "flux": {"x": 0.0}},
    ):
        with pytest.raises(AssertionError):
            check_alike({"points": [other]}, expected)
