"""The names of axes and faces, and how they lie."""

from __future__ import annotations

from typing import Literal

Face = Literal["x_low", "x_high", "y_low", "y_high", "z_low", "z_high"]
FACES: tuple[Face, ...] = ("x_low", "x_high", "y_low", "y_high", "z_low", "z_high")
AXES = ("x", "y", "z")


def axis_of(face: Face) -> int:
    """Index of the axis that a face is square to: 0, 1 or 2."""
    return AXES.index(face[0])


def is_high(face: Face) -> bool:
    """Whether the face is the one at the far end of its axis."""
    return face.endswith("high")


def axes_along(face_or_axis: Face | int) -> tuple[int, int]:
    """The two axes that lie in a face, or in a plane square to an axis, in the order x, y, z."""
    axis = face_or_axis if isinstance(face_or_axis, int) else axis_of(face_or_axis)
    return ((1, 2), (0, 2), (0, 1))[axis]
