"""What comes back.

These describe the answers; answers are built as plain documents and tested against them.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.models.base import Model
from service.models.faces import FaceName
from service.models.problem import PotentialName, Problem

ProblemId = Annotated[
    str,
    Field(pattern=r"^[0-9a-f]{64}$", description="Content digest of the problem.", examples=["3b0c" * 16]),
]

Line = list[float | None]
Table = list[list[list[float | None]]]


class Units(Model):
    """The unit of each kind of quantity in the answer."""

    length: str = Field(description="Unit of lengths.", examples=["mm"])
    potential: str = Field(description="Unit of the potential.", examples=["degC"])
    potential_difference: str = Field(
        description="Unit of differences of the potential, error bounds among them.", examples=["K"]
    )
    conductivity: str = Field(description="Unit of conductivities.", examples=["W/(m K)"])
    film_coefficient: str = Field(description="Unit of film coefficients.", examples=["W/(m^2 K)"])
    flux: str = Field(description="Unit of flows per area.", examples=["W/m^2"])
    density: str = Field(description="Unit of generation per volume.", examples=["W/m^3"])
    flow: str = Field(description="Unit of total flows.", examples=["W"])


class Terms(Model):
    """How much was summed."""

    time_nodes: int = Field(description="Nodes of the integral over time.", examples=[46])
    products: int = Field(
        description="Products of one-dimensional profiles that the data were split into.", examples=[2]
    )
    series_terms: int = Field(
        description="Terms of the double series at the checked places.", examples=[4096]
    )


class Certificate(Model):
    """Evidence for the answer."""

    error_bound: float = Field(
        description="No potential in the answer is further off than this; unit `potential_difference`.",
        examples=[4e-8],
    )
    accuracy_asked: float = Field(
        description="The accuracy that was asked for; unit `potential_difference`.", examples=[6.1e-7]
    )
    agreement: float | None = Field(
        description="Largest difference between the two representations of the solution at the checked "
        "places; null where only one can be evaluated. Unit `potential_difference`.",
        examples=[3e-13],
    )
    agreement_bound: float | None = Field(
        description="What the difference may be by the bounds of both; unit `potential_difference`.",
        examples=[5e-9],
    )
    checked_places: int = Field(description="At how many places both were evaluated.", examples=[3])
    terms: Terms = Field(description="How much was summed.")
    method: str = Field(
        description="How the answer was computed.", examples=["time form, checked by double series"]
    )


class Remark(Model):
    """A warning."""

    code: str = Field(description="A short word for programs.", examples=["unbounded-total"])
    message: str = Field(
        description="What to be aware of.",
        examples=["The total has no finite value, because of: edge x_low/z_low."],
    )
    where: str = Field(
        description="A JSON pointer into this answer; into the problem where it begins with #/problem.",
        examples=["#/faces/z_low"],
    )


class Answer(Model):
    """What every answer carries."""

    problem_id: ProblemId
    potential: PotentialName = Field(description="Which potential it is.", examples=["temperature"])
    units: Units = Field(description="The unit of each kind of quantity in the answer.")
    certificate: Certificate = Field(description="Evidence for the answer.")
    warnings: list[Remark] = Field(description="What to be aware of; often empty.")


class Axes(Model):
    """Places along the axes of a grid, lengths."""

    x: list[float] = Field(description="Places along x; unit `length`.", examples=[[0, 20, 40]])
    y: list[float] = Field(description="Places along y; unit `length`.", examples=[[0, 30, 60]])
    z: list[float] = Field(description="Places along z; unit `length`.", examples=[[20]])


class FluxTables(Model):
    """Components of the flux density on a grid, each in x, y, z order, positive along its axis."""

    x: Table = Field(description="Component along x; unit `flux`.", examples=[[[[1250.0]]]])
    y: Table = Field(description="Component along y; unit `flux`.", examples=[[[[0.0]]]])
    z: Table = Field(description="Component along z; unit `flux`.", examples=[[[[-310.5]]]])


class Flux(Model):
    """Components of the flux density at a point, each positive along its axis; null where it has no finite
    value.
    """

    x: float | None = Field(description="Component along x; unit `flux`.", examples=[1250.0])
    y: float | None = Field(description="Component along y; unit `flux`.", examples=[0.0])
    z: float | None = Field(description="Component along z; unit `flux`.", examples=[-310.5])


class GridAnswer(Model):
    """Values on one grid, in x, y, z order."""

    name: str | None = Field(None, description="The name the request gave.", examples=["mid-plane"])
    shape: list[int] = Field(description="Number of places along x, y and z.", examples=[[3, 3, 1]])
    axes: Axes = Field(description="Places along the axes.")
    potential: Table | None = Field(
        None, description="The potential; unit `potential`.", examples=[[[[30.0], [31.5]], [[30.0], [33.0]]]]
    )
    error_bound: float | None = Field(
        None,
        description="No potential on the grid is further off; unit `potential_difference`.",
        examples=[4e-8],
    )
    flux: FluxTables | None = Field(
        None, description="The flux density vector; null where it has no finite value."
    )
    flux_error_bound: Table | None = Field(
        None,
        description="No component of the flux at the place is further off; unit `flux`.",
        examples=[[[[1e-6]]]],
    )


class PointAnswer(Model):
    """Values at one point."""

    name: str | None = Field(None, description="The name the request gave.", examples=["probe A"])
    at: list[float] = Field(description="Where, along x, y and z; unit `length`.", examples=[[20, 30, 5]])
    potential: float | None = Field(None, description="The potential; unit `potential`.", examples=[412.3])
    error_bound: float | None = Field(
        None, description="The potential is not further off; unit `potential_difference`.", examples=[4e-8]
    )
    flux: Flux | None = Field(None, description="The flux density vector.")
    flux_error_bound: float | None = Field(
        None, description="No component of the flux is further off; unit `flux`.", examples=[1e-6]
    )


class ExtremePlace(Model):
    """A place of highest or lowest potential."""

    at: list[float | None] = Field(
        description="Where, along x, y and z; unit `length`. null where it lies infinitely far.",
        examples=[[20, 30, 0]],
    )
    value: float = Field(description="The potential there; unit `potential`.", examples=[640.0])
    error_bound: float = Field(
        description="The extreme is not further off; unit `potential_difference`.", examples=[0.0]
    )
    where: str = Field(description="On which face, or inside.", examples=["face z_low"])


class Extremes(Model):
    """The places of highest and lowest potential of the body."""

    highest: ExtremePlace = Field(description="The highest potential: the hottest place of a temperature.")
    lowest: ExtremePlace = Field(description="The lowest potential: the coldest place of a temperature.")


class Rectangle(Model):
    """Intervals along the two axes of a face or plane; null for an end that is infinitely far."""

    x: Line | None = Field(None, description="From and to along x; unit `length`.", examples=[[5, 35]])
    y: Line | None = Field(None, description="From and to along y; unit `length`.", examples=[[10, 50]])
    z: Line | None = Field(None, description="From and to along z; unit `length`.", examples=[[0, 20]])


class PartAnswer(Model):
    """The part of a face that a number is about."""

    name: str | None = Field(None, description="The name of the part or patch.", examples=["sight port"])
    face: FaceName = Field(description="The face.", examples=["z_low"])
    patch: int | None = Field(None, description="Number of the patch of the face's map.", examples=[0])
    rectangle: Rectangle | None = Field(None, description="The rectangle; absent for the whole face.")


class MeanAnswer(PartAnswer):
    """The mean potential of a face or a part of it."""

    value: float = Field(description="The mean; unit `potential`.", examples=[412.3])
    error_bound: float = Field(
        description="The mean is not further off; unit `potential_difference`.", examples=[4e-8]
    )


class FieldsAnswer(Answer):
    """Potential and flux on grids and at points."""

    grids: list[GridAnswer] = Field(description="Values on each grid, in the order asked for.")
    points: list[PointAnswer] = Field(description="Values at each point, in the order asked for.")
    extremes: Extremes | None = Field(None, description="The highest and lowest potential, if asked for.")
    means: list[MeanAnswer] | None = Field(None, description="The means, in the order asked for.")


class UnboundedCause(Model):
    """A line where held values jump, so that the flow through its surroundings has no finite total."""

    kind: Literal["edge", "jump_line", "endless"] = Field(
        description="An edge between two held faces, a jump of the value inside one, or a face without end.",
        examples=["edge"],
    )
    line: str = Field(description="Which line.", examples=["edge x_low/z_low"])
    coefficient: float = Field(
        description="Flow gained for each factor e by which a gap along the line shrinks; unit `flow`. For a "
        "face without end the flow per length far along it; unit `flow` per `length`.",
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


class InflowTotal(Model):
    """Total inflow of a face or a part of it, positive into the body."""

    inflow: float | None = Field(
        description="The inflow; unit `flow`. null where it has no finite value.", examples=[1234.5]
    )
    error_bound: float | None = Field(description="It is not further off; unit `flow`.", examples=[1e-6])
    unbounded: list[UnboundedCause] | None = Field(None, description="Why the inflow has no finite value.")
    with_gap: InflowWithGap | None = Field(
        None, description="The inflow with the gap, if `edge_gap` was named."
    )


class PartInflowTotal(PartAnswer, InflowTotal):
    """Total inflow of a part of a face."""


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


class FaceTotals(Model):
    """Total inflow of each face asked for."""

    x_low: InflowTotal | None = Field(None, description="Inflow of the face at x = 0.")
    x_high: InflowTotal | None = Field(None, description="Inflow of the face at x = size.x.")
    y_low: InflowTotal | None = Field(None, description="Inflow of the face at y = 0.")
    y_high: InflowTotal | None = Field(None, description="Inflow of the face at y = size.y.")
    z_low: InflowTotal | None = Field(None, description="Inflow of the face at z = 0.")
    z_high: InflowTotal | None = Field(None, description="Inflow of the face at z = size.z.")


class Balance(Model):
    """Inflow of all faces plus generation, which a steady state makes zero."""

    closed: bool | None = Field(
        description="Whether the sum of inflows and generation is zero within its bound; null where a face "
        "without end has no finite inflow.",
        examples=[True],
    )
    generation: float | None = Field(
        description="Generation in the whole body; unit `flow`.", examples=[96000.0]
    )
    residual: float | None = Field(
        description="Sum of inflows and generation; unit `flow`. Where held values jump, the parts that grow "
        "without bound cancel between the faces and the sum of what is left is given.",
        examples=[2e-9],
    )
    error_bound: float | None = Field(
        description="How far from zero the residual may be by the bounds of its terms; unit `flow`.",
        examples=[5e-7],
    )
    unbounded_faces: list[FaceName] = Field(
        description="Faces whose inflow has no finite value.", examples=[["z_low"]]
    )


class FluxTotalsAnswer(Answer):
    """Total flow through faces, parts of faces and planes."""

    faces: FaceTotals = Field(description="Inflow of each face asked for.")
    patches: list[PartInflowTotal] = Field(
        description="Inflow of each part asked for, in the order asked for."
    )
    planes: list[PlaneFlowTotal] = Field(description="Flow through each plane, in the order asked for.")
    balance: Balance = Field(description="Inflow of all faces plus generation.")


class SeriesStep(Model):
    """The double series cut off after some terms."""

    terms: int = Field(description="Terms along each axis.", examples=[16])
    value: float | None = Field(description="Its value; unit `potential`.", examples=[412.29])
    error: float | None = Field(
        description="How far it is from the answer; unit `potential_difference`.", examples=[0.0031]
    )
    tail_bound: float | None = Field(
        description="Bound on the sum of all further terms; unit `potential_difference`. null where there is "
        "none.",
        examples=[0.02],
    )


class TimeStep(Model):
    """The integral over time with some nodes."""

    nodes: int = Field(description="Nodes.", examples=[23])
    value: float = Field(description="Its value; unit `potential`.", examples=[412.3])
    error: float = Field(
        description="How far it is from the answer; unit `potential_difference`.", examples=[2e-6]
    )
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
    error_bound: float = Field(
        description="It is not further off; unit `potential_difference`.", examples=[4e-8]
    )
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
        description="Series terms along each axis for the accuracy asked for; null where no number is "
        "enough.",
        examples=[41],
    )
    series: list[SeriesStep] = Field(description="The double series with more and more terms.")
    time_nodes: int = Field(
        description="Nodes the integral over time takes for the accuracy asked for.", examples=[46]
    )
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
    at: Line | None = Field(
        description="Where on the face, in the order of its axes; unit `length`.", examples=[[0.6, 30]]
    )


class ConvergenceAnswer(Answer):
    """How the answer converges at some places."""

    points: list[ConvergencePoint] = Field(description="Each place, in the order asked for.")
    overshoot: list[Overshoot] = Field(description="For each face with data that jump.")


class ProblemAnswer(Model):
    """A stored problem."""

    problem_id: ProblemId
    problem: Problem = Field(description="The problem as it is stored: what was posted, defaults filled in.")
    units: Units = Field(description="The unit of each kind of quantity, those left out filled in.")
    warnings: list[Remark] = Field(description="What to be aware of; often empty.")


class CacheState(Model):
    """How one cache does."""

    hits: int = Field(description="How often something was found.", examples=[120])
    misses: int = Field(description="How often it was not.", examples=[14])
    size: int = Field(description="How full it is: entries, or bytes for answers.", examples=[14])
    limit: int = Field(description="How full it may get.", examples=[64])


class WorkState(Model):
    """How busy the worker is."""

    threads: int = Field(description="Computations at the same time.", examples=[4])
    running: int = Field(description="Computations now.", examples=[1])
    waiting: int = Field(description="Requests that wait for a thread.", examples=[0])
    queue_length: int = Field(description="Requests that may wait.", examples=[32])
    finished: int = Field(description="Computations since the start.", examples=[250])
    turned_away: int = Field(description="Requests answered 503 since the start.", examples=[0])
    interrupted: int = Field(description="Computations stopped since the start.", examples=[0])
    seconds: float = Field(description="Time spent computing since the start, s.", examples=[12.7])


class StoreState(Model):
    """How full the store of problems is."""

    problems: int = Field(description="Problems stored.", examples=[17])
    size: int = Field(description="Their size, bytes.", examples=[23117])
    limit: int = Field(description="Size allowed, bytes.", examples=[536870912])


class Diagnostics(Model):
    """What the service is doing."""

    version: str = Field(description="Release of the service.", examples=["0.1.0"])
    caches: dict[str, CacheState] = Field(
        description="What is kept for the next request, by name.",
        examples=[{"answers": {"hits": 120, "misses": 14, "size": 80211, "limit": 67108864}}],
    )
    work: WorkState = Field(description="How busy the worker is.")
    store: StoreState = Field(description="How full the store of problems is.")


class Health(Model):
    """Whether the service is well."""

    status: Literal["ok"] = Field(
        description="Always ok; otherwise an error document comes.", examples=["ok"]
    )
