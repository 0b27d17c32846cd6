"""POST /v1/fields: potential and flux on grids and at points."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.evaluate import FieldsQuestion
from service.models.fields_answer import FieldsAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.fields import answer_fields, check_cost, read_fields

router = APIRouter(prefix="/v1", tags=["answers"], route_class=AnswerRoute)

_CALL = Call(read_fields, check_cost, answer_fields)


@router.post(
    "/fields",
    summary="Potential and flux on grids and at points",
    responses=answer_responses("/v1/fields", FieldsAnswer),
    response_class=Response,
)
async def fields(
    request: Request,
    question: Annotated[FieldsQuestion, Body(openapi_examples=body_examples("/v1/fields"))],
) -> Response:
    """Potential and flux density vector on rectilinear grids and at named points, with error bounds.

    On request also the highest and the lowest potential of the body, and means of faces, patches and
    rectangles. Places may lie anywhere in the closed body: inside, on faces, on edges. With `Accept:
    application/vnd.stillfield.npz` the arrays come in binary.
    """
    return await answer(request, question, _CALL)
