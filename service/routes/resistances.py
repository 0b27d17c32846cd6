"""POST /v1/resistances: rise of pads per unit flow, and the network of resistors that is equivalent."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.media import FORMS, Form
from service.models.pads import ResistancesQuestion
from service.models.resistances_answer import ResistancesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.resistance_forms import matrix_csv, netlist
from service.translation.resistances import answer_resistances, check_cost, read_resistances

# A double as text takes as much as in JSON.
CSV_FORM = Form("text/csv", 25, "resistances.csv", matrix_csv)
NETLIST_FORM = Form("text/plain", 25, "resistors.txt", netlist)
MATRIX_FORMS = (*FORMS, CSV_FORM, NETLIST_FORM)


class MatrixRoute(AnswerRoute):
    """A route that also answers with a table or a list of resistors."""

    forms: Sequence[Form] = MATRIX_FORMS


router = APIRouter(prefix="/v1", tags=["answers"], route_class=MatrixRoute)

_CALL = Call(read_resistances, check_cost, answer_resistances, MATRIX_FORMS)

_TEXT_FORMS = {
    CSV_FORM: "The matrix of mean rises as a table (RFC 4180): a row for each pad that is read, a column for each "
    "that is fed.",
    NETLIST_FORM: "The network as one resistor a line, its name beginning with R, two nodes and a value, always in "
    "the coherent SI unit of potential per flow, such as ohm or K/W, which the comment lines name; these begin with an "
    "asterisk. Pads are numbered from 1; node 0 is the environment.",
}


@router.post(
    "/resistances",
    summary="Resistances between pads, and the equivalent network",
    responses=answer_responses(
        "/v1/resistances",
        ResistancesAnswer,
        {form.media_type: description for form, description in _TEXT_FORMS.items()},
    ),
    response_class=Response,
)
async def resistances(
    request: Request,
    question: Annotated[ResistancesQuestion, Body(openapi_examples=body_examples("/v1/resistances"))],
) -> Response:
    """By how much each pad rises for a unit of flow into each, and resistors between pads that do the same.

    The data of the problem count for nothing here: every held value and ambient is the environment, at zero, and only
    the pad that is fed takes a flow. With `Accept: text/csv` the matrix comes as a table, with `Accept: text/plain` the
    network as a list of resistors for a circuit solver. In the table a name that begins with = + - @ or a tab has an
    apostrophe before it, so that no spreadsheet takes it for a formula.
    """
    return await answer(request, question, _CALL)
