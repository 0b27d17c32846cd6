"""The error document of RFC 9457."""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict, Field


class FieldError(BaseModel):
    """What is wrong with one field."""

    pointer: str = Field(
        description="Where the field is in the request body: a JSON pointer (RFC 6901) as a URI fragment.",
        examples=["#/problem/faces/z_low/value/patches/1"],
    )
    detail: str = Field(
        description="What is wrong and what would be right.",
        examples=['The unit "kg" does not measure length; wanted is a length such as mm.'],
    )
    code: str = Field(description="A short word for the mistake, for programs.", examples=["unit"])


class ProblemDetails(BaseModel):
    """Why a request was not answered (RFC 9457)."""

    model_config = ConfigDict(extra="allow")

    type: str = Field(
        description="Path of the description of this type of error.",
        examples=["/problem-types/invalid-request"],
    )
    title: str = Field(
        description="The type in words; the same for every error of the type.",
        examples=["Some fields of the request cannot be used"],
    )
    status: int = Field(description="The HTTP status.", examples=[422])
    detail: str = Field(
        description="What happened this time.",
        examples=["One field of the request cannot be used; see `errors`."],
    )
    instance: str | None = Field(
        None,
        description="Name of this occurrence, under which an unexpected failure was logged.",
        examples=["urn:uuid:6a1f7c1e-0f0b-4b8e-9a55-0d8f4f6b2c11"],
    )
    errors: list[FieldError] | None = Field(None, description="The fields that are at fault.")
    estimate: float | None = Field(
        None,
        description="What the request would take, where a limit is passed; unit in `detail`.",
        examples=[4.2e12],
    )
    limit: float | None = Field(None, description="The limit that is passed; unit in `detail`.", examples=[4e11])
    imbalance: float | None = Field(
        None,
        description="Flow that the given inflows and sources add up to where they have to add up to zero, in "
        "the problem's unit of flow.",
        examples=[12.5],
    )
    bound: float | None = Field(
        None, description="The error bound that could be reached, in the problem's unit.", examples=[3e-7]
    )
