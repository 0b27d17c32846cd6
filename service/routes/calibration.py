"""POST /v1/calibration: what readings say about what is not known."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.calibration import CalibrationQuestion
from service.models.calibration_answer import CalibrationAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.calibration import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/calibration",
    summary="What readings say about numbers and maps that are not known",
    responses=answer_responses("/v1/calibration", CalibrationAnswer),
    response_class=Response,
)
async def calibration(
    request: Request,
    question: Annotated[CalibrationQuestion, Body(openapi_examples=body_examples("/v1/calibration"))],
) -> Response:
    """Numbers of a problem, and a smooth map on a face, from readings of its results with their uncertainties.

    The unknowns are those that meet the readings best, weighted least squares, with what is known of them beforehand
    counted as a reading. Told with them: standard uncertainties and 95 % intervals, correlations, what each reading
    leaves over and how much hangs on it, whether the readings agree with the body at all, and which unknowns they
    cannot tell apart, with the combination that they do tell. Results without a reading are predicted, with their
    uncertainty. A map is found as the mean of all smooth maps, each as likely as the readings make it, and where they
    do not determine it is said. Intervals come from statistics and are no bounds.
    """
    return await answer(request, question, _CALL)
