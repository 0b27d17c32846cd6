"""The solver core: steady potential fields in rectangular bodies. It knows no web and converts no units."""

from service.core.errors import (
    AccuracyNotReached,
    CoreError,
    Interrupted,
    NoSteadyState,
    NotPhysical,
    OutsideBody,
)
from service.core.field import Field, Grid
from service.core.maps import FaceMap, Patch, Rectangle
from service.core.problem import (
    AXES,
    FACES,
    Body,
    BoxSource,
    Condition,
    Face,
    Film,
    Held,
    Inflow,
    Insulated,
)
from service.core.solution import Solution, solve

__all__ = [
    "AXES",
    "FACES",
    "AccuracyNotReached",
    "Body",
    "BoxSource",
    "Condition",
    "CoreError",
    "Face",
    "FaceMap",
    "Field",
    "Film",
    "Grid",
    "Held",
    "Inflow",
    "Insulated",
    "Interrupted",
    "NoSteadyState",
    "NotPhysical",
    "OutsideBody",
    "Patch",
    "Rectangle",
    "Solution",
    "solve",
]
