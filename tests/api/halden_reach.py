"""Requests about the invented glass furnace Halden Reach, small enough to compute in a moment."""

from __future__ import annotations

import copy
from typing import Any

Json = dict[str, Any]


def sight_port_bar() -> Json:
    """A bar in a cooled frame whose end sees the glass through a window: a face of every kind."""
    return {
        "name": "sight-port bar in a cooled frame",
        "potential": "temperature",
        "units": {"length": "mm", "potential": "degC"},
        "body": {
            "size": {"x": 40, "y": 60, "z": "semi-infinite"},
            "conductivity": {"x": 95, "y": 95, "z": 130},
        },
        "faces": {
            "x_low": {"condition": "held", "value": 30},
            "x_high": {"condition": "film", "coefficient": "850 W/(m^2 K)", "ambient": 24},
            "y_low": {"condition": "insulated"},
            "y_high": {"condition": "flux", "inflow": "1.5 kW/m^2"},
            "z_low": {
                "condition": "held",
                "value": {
                    "map": "patches",
                    "background": 30,
                    "patches": [{"x": [5, 35], "y": [10, 50], "value": 640, "name": "window"}],
                },
            },
        },
    }


def block(**faces: Json) -> Json:
    """A block of 40 x 60 x 25 mm, every face held at 30 degC but those given."""
    problem = sight_port_bar()
    problem["body"]["size"]["z"] = 25
    names = ("x_low", "x_high", "y_low", "y_high", "z_low", "z_high")
    problem["faces"] = {name: {"condition": "held", "value": 30} for name in names} | faces
    return problem


def slab(low: float | str = 20, high: float | str = 80) -> Json:
    """A block that conducts along z alone, between two held ends."""
    insulated = {"condition": "insulated"}
    return block(
        x_low=insulated,
        x_high=insulated,
        y_low=insulated,
        y_high=insulated,
        z_low={"condition": "held", "value": low},
        z_high={"condition": "held", "value": high},
    )


def ask_points(problem: Json, *places: list[float | str], **more: Any) -> Json:
    """A question for the potential at some points."""
    evaluate = {"points": [{"at": list(place)} for place in places]} | more
    return {"problem": problem, "evaluate": evaluate}


def changed(value: Json, path: str, new: Any) -> Json:
    """A copy with the value at a path such as problem/body/size/x replaced, or removed where it is `...`."""
    value = copy.deepcopy(value)
    *parents, last = path.split("/")
    here: Any = value
    for part in parents:
        here = here[int(part) if isinstance(here, list) else part]
    key = int(last) if isinstance(here, list) else last
    if new is ...:
        del here[key]
    else:
        here[key] = new
    return value
