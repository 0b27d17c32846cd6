"""Questions about pads: their potentials, and the resistances between them."""

from __future__ import annotations

from pydantic import Field

from service.models.base import Model
from service.models.evaluate import LONGEST_LIST, FacePart, PatchReference, Question
from service.models.faces import FaceName


class PadReference(Model):
    """A pad: a patch of a face with a given flow, or a pad of a mixed face."""

    face: FaceName = Field(description="The face.", examples=["z_high"])
    patch: PatchReference = Field(description="The pad, by its number from 0 or its name.", examples=["valve A", 0])


class PadsEvaluate(Model):
    """Which pads are wanted: patches of faces with a given flow, and pads of mixed faces."""

    faces: list[FaceName] | None = Field(
        None, max_length=6, description="Faces all of whose pads are wanted.", examples=[["z_high"]]
    )
    pads: list[PadReference] | None = Field(
        None,
        max_length=LONGEST_LIST,
        description="Single pads. Every pad of the problem is taken if neither `faces` nor `pads` is given.",
        examples=[[{"face": "z_high", "patch": "valve A"}]],
    )


class PadsQuestion(Question):
    """Mean, largest and centre potential of pads."""

    evaluate: PadsEvaluate = Field(
        default_factory=lambda: PadsEvaluate(faces=None, pads=None),
        description="Which pads are wanted; all of them if left out.",
        examples=[{"faces": ["z_high"]}],
    )


class ResistancesEvaluate(Model):
    """Between which pads resistances are wanted."""

    pads: list[FacePart] | None = Field(
        None,
        min_length=1,
        max_length=LONGEST_LIST,
        description="The pads, in the order of the matrix: patches or pads of faces by name or number, or rectangles. "
        "Every pad of the problem is taken if left out.",
        examples=[[{"face": "z_high", "name": "valve A", "x": [5, 11], "y": [4, 9]}, {"face": "z_high", "patch": 1}]],
    )
    peaks: bool = Field(
        False,
        description="Whether the largest rise of each pad per unit flow into each other is wanted as well.",
        examples=[True],
    )


class ResistancesQuestion(Question):
    """Rise of pads per unit flow, and the network of resistors that is equivalent."""

    evaluate: ResistancesEvaluate = Field(
        default_factory=lambda: ResistancesEvaluate(pads=None, peaks=False),
        description="Between which pads; all of them if left out.",
        examples=[{"peaks": True}],
    )
