"""The answer to POST /v1/convergence."""

from __future__ import annotations

from pydantic import Field

from service.models.answers import Answer
from service.models.base import Model
from service.models.faces import FaceName


class SeriesStep(Model):
    """The double series cut off after some terms."""

    terms: int = Field(description="Terms along each axis.", examples=[16])
    value: float | None = Field(description="Its value; unit `potential`.", examples=[412.29])
    error: float | None = Field(
        description="How far it is from the answer; unit `potential_difference`.", examples=[0.0031]
    )
    tail_bound: float | None = Field(
        description="Bound on the sum of all further terms; unit `potential_difference`. null where there is none.",
        examples=[0.02],
    )


class TimeStep(Model):
    """The integral over time with some nodes."""

    nodes: int = Field(description="Nodes.", examples=[23])
    value: float = Field(description="Its value; unit `potential`.", examples=[412.3])
    error: float = Field(description="How far it is from the answer; unit `potential_difference`.", examples=[2e-6])
    error_bound: float | None = Field(
        description="Bound on that, known before; unit `potential_difference`. null where there is none.",
        examples=[5e-5],
    )


class TenfoldTighter(Model):
    """What ten times more accuracy costs."""

    time_nodes: int = Field(description="Nodes of the integral over time it takes.", examples=[50])
    cost_ratio: float = Field(description="Work against that of the accuracy asked for.", examples=[1.09])


class ConvergencePoint(Model):
    """How the answer converges at one place."""

    name: str | None = Field(None, description="The name the request gave.", examples=["probe A"])
    at: list[float] = Field(description="Where, along x, y and z; unit `length`.", examples=[[20, 30, 5]])
    value: float = Field(description="The potential; unit `potential`.", examples=[412.3])
    error_bound: float = Field(description="It is not further off; unit `potential_difference`.", examples=[4e-8])
    agreement: float | None = Field(
        description="Difference between the two representations; unit `potential_difference`. null where "
        "only one can be evaluated.",
        examples=[3e-13],
    )
    agreement_bound: float | None = Field(
        description="What the difference may be by the bounds of both; unit `potential_difference`.",
        examples=[5e-9],
    )
    terms_needed: int | None = Field(
        description="Series terms along each axis for the accuracy asked for; null where no number is enough.",
        examples=[41],
    )
    series: list[SeriesStep] = Field(description="The double series with more and more terms.")
    time_nodes: int = Field(description="Nodes the integral over time takes for the accuracy asked for.", examples=[46])
    time_steps: list[TimeStep] = Field(description="The integral over time with more and more nodes.")
    tenfold_tighter: TenfoldTighter = Field(description="What ten times more accuracy costs.")


class Overshoot(Model):
    """How far the truncated series swings past a jump of the data of a face."""

    face: FaceName = Field(description="The face that drives the field.", examples=["z_low"])
    terms: int = Field(description="Terms along each axis.", examples=[32])
    overshoot: float | None = Field(
        description="Largest excess as a part of the jump; it tends to 0.0895 and not to zero.",
        examples=[0.091],
    )
    at: list[float] = Field(
        description="Where on the face, in the order of its axes; unit `length`.", examples=[[0.6, 30]]
    )


class ConvergenceAnswer(Answer):
    """How the answer converges at some places."""

    points: list[ConvergencePoint] = Field(description="Each place, in the order asked for.")
    overshoot: list[Overshoot] = Field(description="For each face with data that jump.")
