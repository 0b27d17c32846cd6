"""POST /v1/flux-totals: inflow of faces and parts of them, flow through planes, and the balance."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.evaluate import FluxTotalsQuestion
from service.models.flux_totals_answer import FluxTotalsAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.flux_totals import answer_totals, check_cost, read_totals

router = APIRouter(prefix="/v1", tags=["answers"], route_class=AnswerRoute)

_CALL = Call(read_totals, check_cost, answer_totals)


@router.post(
    "/flux-totals",
    summary="Total flow through faces, patches and planes",
    responses=answer_responses("/v1/flux-totals", FluxTotalsAnswer),
    response_class=Response,
)
async def flux_totals(
    request: Request,
    question: Annotated[FluxTotalsQuestion, Body(openapi_examples=body_examples("/v1/flux-totals"))],
) -> Response:
    """Inflow of each face, of patches and rectangles, and the flow through planes, with the balance of all.

    Where two held values meet in a jump the flow has no finite total. It is then null, with the lines that
    cause it, the flow gained for each factor e by which a gap along the line shrinks, and, if `edge_gap` was
    named, the flow through the rest.
    """
    return await answer(request, question, _CALL)
