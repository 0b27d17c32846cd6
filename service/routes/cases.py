"""POST /v1/cases: results of a table of cases."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.cases import CasesQuestion
from service.models.cases_answer import CasesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.table_of_cases import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/cases",
    summary="The same results for many values of some numbers",
    responses=answer_responses("/v1/cases", CasesAnswer),
    response_class=Response,
)
async def cases(
    request: Request,
    question: Annotated[CasesQuestion, Body(openapi_examples=body_examples("/v1/cases"))],
) -> Response:
    """A table of cases: a list, a CSV text, every combination of values, or a design of experiments.

    Each number is pointed to where it stands in the request. A case that cannot be computed, because the body it makes
    is none, is named among the failures and does not stop the others. Long tables go to POST /v1/studies.
    """
    return await answer(request, question, _CALL)
