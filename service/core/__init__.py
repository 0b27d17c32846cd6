"""The solver core: steady potential fields in rectangular bodies. It knows no web and converts no units."""

from service.core.balance import Balance
from service.core.bounded import Bounded, Total
from service.core.caches import CacheReport, cache_report
from service.core.certificate import Certificate
from service.core.climbing import Place
from service.core.conditions import Condition, Film, FilmPad, FluxPad, Held, HeldPad, Inflow, Insulated, Mixed
from service.core.convergence import Convergence, NodeStep, Overshoot, SeriesStep
from service.core.decay_rates import DecayRate
from service.core.errors import (
    AccuracyNotReached,
    CoreError,
    Interrupted,
    NoSteadyState,
    NotPhysical,
    OutsideBody,
    OutsideLaw,
    TooManyPanels,
)
from service.core.estimate import Estimate
from service.core.extremes import Extremes
from service.core.faces import AXES, FACES, Face
from service.core.fed_pads import Pad
from service.core.field import Field, Grid
from service.core.influence import Influence, influence, peaks
from service.core.laws import ConductivityLaw, Radiation
from service.core.maps import FaceMap, Patch, Rectangle
from service.core.problem import Body, BoxSource, Layer
from service.core.reach import Reach, Reached
from service.core.solution import Solution
from service.core.solving import solve
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
    "DecayRate",
    "Estimate",
    "Extremes",
    "Face",
    "FaceMap",
    "Field",
    "Film",
    "FilmPad",
    "FluxPad",
    "Grid",
    "Held",
    "HeldPad",
    "Inflow",
    "Influence",
    "Insulated",
    "Interrupted",
    "Layer",
    "Mixed",
    "NoSteadyState",
    "NodeStep",
    "NotPhysical",
    "OutsideBody",
    "OutsideLaw",
    "Overshoot",
    "Pad",
    "Patch",
    "Place",
    "Radiation",
    "Reach",
    "Reached",
    "Rectangle",
    "SeriesStep",
    "Solution",
    "TooManyPanels",
    "Total",
    "UnboundedCause",
    "cache_report",
    "influence",
    "peaks",
    "solve",
]
