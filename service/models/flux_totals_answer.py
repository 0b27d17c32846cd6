"""The answer to POST /v1/flux-totals."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.answers import Answer, Certificate, PartAnswer, Rectangle
from service.models.base import Model
from service.models.faces import FaceName


class UnboundedCause(Model):
    """A line where held values jump, so that the flow through its surroundings has no finite total."""

    kind: Literal["edge", "jump_line", "endless", "endless_plane"] = Field(
        description="An edge between two held faces, a jump of the value inside one, a face without end, or one "
        "without end along both of its axes.",
        examples=["edge"],
    )
    line: str = Field(description="Which line.", examples=["edge x_low/z_low"])
    coefficient: float = Field(
        description="Flow gained for each factor e by which a gap along the line shrinks; unit `flow`. For a "
        "face without end the flow per length far along it, unit `flow` per `length`, along both axes the flow per "
        "area there; 0 where the flow through the whole grows without limit but ever more slowly.",
        examples=[812.4],
    )
    largest_jump: float = Field(
        description="Largest jump of the held value along the line; unit `potential_difference`.",
        examples=[610.0],
    )


class InflowWithGap(Model):
    """The inflow of what is left when the strip `edge_gap` is taken off."""

    inflow: float = Field(description="The inflow; unit `flow`.", examples=[3950.2])
    error_bound: float = Field(description="It is not further off; unit `flow`.", examples=[1e-5])


class FlowWithGap(Model):
    """The flow through a plane without a strip of the gap's width along the lines that make it unbounded."""

    flow: float = Field(description="The flow along the axis; unit `flow`.", examples=[812.4])
    error_bound: float = Field(description="It is not further off; unit `flow`.", examples=[1e-5])


class InflowTotal(Model):
    """Total inflow of a face or a part of it, positive into the body."""

    inflow: float | None = Field(
        description=(
            "The inflow; unit `flow`. null where it has no finite value. Across a jump that the face or part reaches "
            "over to both sides, or along an edge where jumps of both signs cancel, it is the limit of equal gaps."
        ),
        examples=[1234.5],
    )
    error_bound: float | None = Field(description="It is not further off; unit `flow`.", examples=[1e-6])
    unbounded: list[UnboundedCause] | None = Field(None, description="Why the inflow has no finite value.")
    with_gap: InflowWithGap | None = Field(None, description="The inflow with the gap, if `edge_gap` was named.")


class PadLevel(Model):
    """A potential of a pad of a mixed face."""

    value: float = Field(description="The potential; unit `potential`.", examples=[12.7])
    error_bound: float = Field(description="It is not further off; unit `potential_difference`.", examples=[1e-5])


class PartInflowTotal(PartAnswer, InflowTotal):
    """Total inflow of a part of a face."""

    potential: PadLevel | None = Field(
        None,
        description="Of a pad of a mixed face: the level of a held pad, given or found; the mean over a film pad.",
    )


class PlaneFlowTotal(Model):
    """Total flow through a plane, positive along its axis."""

    name: str | None = Field(None, description="The name the request gave.", examples=["flange"])
    axis: Literal["x", "y", "z"] = Field(description="The axis the plane is square to.", examples=["z"])
    position: float = Field(description="Where it lies on the axis; unit `length`.", examples=[20])
    rectangle: Rectangle | None = Field(None, description="The rectangle; absent for the whole plane.")
    flow: float | None = Field(
        description="The flow along the axis; unit `flow`. null where it has no finite value.",
        examples=[980.1],
    )
    error_bound: float | None = Field(description="It is not further off; unit `flow`.", examples=[1e-6])
    unbounded: list[UnboundedCause] | None = Field(None, description="Why the flow has no finite value.")
    with_gap: FlowWithGap | None = Field(None, description="The flow with the gap, if `edge_gap` was named.")


class FaceTotals(Model):
    """Total inflow of each face asked for."""

    x_low: InflowTotal | None = Field(None, description="Inflow of the face at x = 0.")
    x_high: InflowTotal | None = Field(None, description="Inflow of the face at x = size.x.")
    y_low: InflowTotal | None = Field(None, description="Inflow of the face at y = 0.")
    y_high: InflowTotal | None = Field(None, description="Inflow of the face at y = size.y.")
    z_low: InflowTotal | None = Field(None, description="Inflow of the face at z = 0.")
    z_high: InflowTotal | None = Field(None, description="Inflow of the face at z = size.z.")


class Balance(Model):
    """Inflow of all faces plus generation, less what is carried off, which a steady state makes zero."""

    closed: bool | None = Field(
        description="Whether the sum of inflows and generation is zero within its bound; null where a face "
        "without end has no finite inflow.",
        examples=[True],
    )
    generation: float | None = Field(description="Generation in the whole body; unit `flow`.", examples=[96000.0])
    carried_off: float | None = Field(
        description="What flows away for ever, where no axis has a far end and no face is held or has a film; unit "
        "`flow`. null for other bodies, where nothing does.",
        examples=[None],
    )
    residual: float | None = Field(
        description="Sum of inflows and generation, less what is carried off; unit `flow`. Where held values jump, the "
        "parts that grow without bound cancel between the faces and the sum of what is left is given.",
        examples=[2e-9],
    )
    error_bound: float | None = Field(
        description="How far from zero the residual may be by the bounds of its terms; unit `flow`.",
        examples=[5e-7],
    )
    unbounded_faces: list[FaceName] = Field(description="Faces whose inflow has no finite value.", examples=[["z_low"]])


class FluxTotalsCertificate(Certificate):
    """Evidence for the answer."""

    error_bound: float = Field(
        description="No potential in the answer is further off than this, or where it has none that of the middle of "
        "the body; unit `potential_difference`. 0 where all are given.",
        examples=[4e-8],
    )
    flow_error_bound: float = Field(
        description="No inflow and no flow through a plane is further off than this; unit `flow`.", examples=[1.5e-2]
    )
    flow_accuracy_asked: float | None = Field(
        description="What flows were asked for where a face is mixed: the same part of the sum of the sizes of all "
        "flows through pads as the accuracy is of the span; unit `flow`. null where no face is mixed.",
        examples=[2.8e-2],
    )


class FluxTotalsAnswer(Answer):
    """Total flow through faces, parts of faces and planes."""

    certificate: FluxTotalsCertificate = Field(description="Evidence for the answer.")
    faces: FaceTotals = Field(description="Inflow of each face asked for.")
    patches: list[PartInflowTotal] = Field(description="Inflow of each part asked for, in the order asked for.")
    planes: list[PlaneFlowTotal] = Field(description="Flow through each plane, in the order asked for.")
    balance: Balance = Field(description="Inflow of all faces plus generation.")
