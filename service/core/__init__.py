"""The solver core: steady potential fields in rectangular bodies. It knows no web and converts no units."""

from service.core.caches import CacheReport, cache_report
from service.core.certificate import Certificate
from service.core.convergence import Convergence, NodeStep, Overshoot, SeriesStep
from service.core.errors import (
    AccuracyNotReached,
    CoreError,
    Interrupted,
    NoSteadyState,
    NotPhysical,
    OutsideBody,
    OutsideLaw,
)
from service.core.estimate import Estimate
from service.core.extremes import Extremes, Place
from service.core.field import Field, Grid
from service.core.laws import ConductivityLaw, Radiation
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
    Layer,
)
from service.core.solution import Solution
from service.core.solving import solve
from service.core.totals import Balance, Bounded, Total
from service.core.unbounded import UnboundedCause

__all__ = [
    "AXES",
    "FACES",
    "AccuracyNotReached",
    "Balance",
    "Body",
    "Bounded",
    "BoxSource",
    "CacheReport",
    "Certificate",
    "Condition",
    "ConductivityLaw",
    "Convergence",
    "CoreError",
    "Estimate",
    "Extremes",
    "Face",
    "FaceMap",
    "Field",
    "Film",
    "Grid",
    "Held",
    "Inflow",
    "Insulated",
    "Interrupted",
    "Layer",
    "NoSteadyState",
    "NodeStep",
    "NotPhysical",
    "OutsideBody",
    "OutsideLaw",
    "Overshoot",
    "Patch",
    "Place",
    "Radiation",
    "Rectangle",
    "SeriesStep",
    "Solution",
    "Total",
    "UnboundedCause",
    "cache_report",
    "solve",
]
