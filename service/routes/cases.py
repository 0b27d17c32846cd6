"""POST /v1/cases: results of a table of cases."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.media import FORMS, Form
from service.models.cases import CasesQuestion
from service.models.cases_answer import CasesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.case_forms import table_csv
from service.translation.table_of_cases import CALL

# A double as text takes as much as in JSON.
CSV_FORM = Form("text/csv", 25, "cases.csv", table_csv)
CASES_FORMS = (*FORMS, CSV_FORM)


class CasesRoute(AnswerRoute):
    """A route that also answers with a table for spreadsheets."""

    forms: Sequence[Form] = CASES_FORMS


router = APIRouter(prefix="/v1", tags=["decisions"], route_class=CasesRoute)

_CALL = call_of(CALL, CASES_FORMS)

_CSV = (
    "The cases as a table (RFC 4180), a case a row: its numbers, each result beside its error bound, the margin of "
    "each limit beside whether it holds, and what failed."
)


@router.post(
    "/cases",
    summary="The same results for many values of some numbers",
    responses=answer_responses("/v1/cases", CasesAnswer, {CSV_FORM.media_type: _CSV}),
    response_class=Response,
)
async def cases(
    request: Request,
    question: Annotated[CasesQuestion, Body(openapi_examples=body_examples("/v1/cases"))],
) -> Response:
    """A table of cases: a list, a CSV text, every combination of values, or a design of experiments.

    Each number is pointed to where it stands in the request. A case that cannot be computed, because the body it makes
    is none, is named among the failures and does not stop the others. With `Accept: text/csv` the table comes a case a
    row; a name that begins with = + - @ or a tab has an apostrophe before it there, so that no spreadsheet takes it for
    a formula. Long tables go to POST /v1/studies.
    """
    return await answer(request, question, _CALL)
