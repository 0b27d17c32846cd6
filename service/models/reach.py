"""The question how far a face reaches."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.models.base import Model, Number
from service.models.evaluate import Question
from service.models.faces import FaceName

MOST_FRACTIONS, MOST_MODES = 10, 100

# Below the smallest the disturbance comes near the accuracies that are offered; on the face itself it is 1.
SMALLEST_FRACTION, LARGEST_FRACTION = 1e-6, 0.999

Fraction = Annotated[Number, Field(ge=SMALLEST_FRACTION, le=LARGEST_FRACTION)]


class ReachEvaluate(Model):
    """Which face, and what it has to have fallen to."""

    face: FaceName = Field(description="The face whose disturbance is followed.", examples=["z_low"])
    fractions: list[Fraction] = Field(
        default_factory=lambda: [0.5, 0.1, 0.01],
        min_length=1,
        max_length=MOST_FRACTIONS,
        description="What the disturbance has to have fallen below, in parts of its largest size on the face.",
        examples=[[0.5, 0.1, 0.01]],
    )
    change: Literal["as_given", "uniform"] = Field(
        "as_given",
        description="What disturbs: the face's data as they are given, counted from the level that most other faces "
        "share, or a change of them by one unit all over the face.",
        examples=["uniform"],
    )
    modes: int = Field(
        10, ge=1, le=MOST_MODES, description="How many decay rates are wanted, the slowest first.", examples=[10]
    )


class ReachQuestion(Question):
    """How far from a face its disturbance reaches."""

    evaluate: ReachEvaluate = Field(
        description="Which face, and what its disturbance has to have fallen to. The accuracy is taken as part of the "
        "largest size of the disturbance."
    )
