"""An answer about resistances as a table and as a list of resistors.

The table is CSV (RFC 4180). The list has one element a line, its name beginning with R, two nodes and a value, and
comment lines that begin with an asterisk, which is how circuit solvers have long shared networks; node 0 is the
environment. Such a solver takes its numbers for ohms, so that values are in the coherent SI unit whatever is declared:
ohms for volts and amperes, K/W for temperatures and watts.
"""

from __future__ import annotations

import csv
import io
from typing import Any

import numpy as np

from service.cells import as_cell
from service.core.network import resistance
from service.unit_text import factor_between
from service.units import PHYSICS, Kind

# Characters that end a line somewhere would end a comment.
_CONTROL = dict.fromkeys((*range(32), 127, 0x85, 0x2028, 0x2029), " ")


def pad_name(pad: dict[str, Any]) -> str:
    """What to call a pad: its name, or its face with its number or rectangle."""
    if "name" in pad:
        return str(pad["name"])
    if "patch" in pad:
        return f"{pad['face']} {pad['patch']}"
    if "rectangle" in pad:
        ends = (f"{axis} {low:g} to {high:g}" for axis, (low, high) in pad["rectangle"].items())
        return f"{pad['face']} {', '.join(ends)}"
    return str(pad["face"])


def matrix_csv(answer: dict[str, Any]) -> bytes:
    """Mean rises per unit flow: a row for each pad that rises, a column for each that is fed.

    Where there are none, the resistances between every two pads.
    """
    names = [as_cell(pad_name(pad)) for pad in answer["pads"]]
    what, matrix = ("resistance between", answer["pairs"])
    if answer["mean"] is not None:
        what, matrix = ("mean rise per unit flow", answer["mean"])
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([f"{what} [{answer['units']['resistance']}]", *names])
    for name, row in zip(names, matrix["value"], strict=True):
        writer.writerow([name, *(repr(float(entry)) for entry in row)])
    return text.getvalue().encode()


def netlist(answer: dict[str, Any]) -> bytes:
    """Resistors between the pads, numbered from 1, and from each to node 0, the environment."""
    network = answer["network"]
    unit = PHYSICS[answer["potential"]].defaults[Kind.RESISTANCE]
    factor = factor_between(answer["units"]["resistance"], unit)
    assert factor is not None
    lines = [
        "* Resistors equivalent to a body as seen from its pads",
        f"* problem {answer['problem_id']}",
        f"* values in {unit}, the coherent SI unit of potential per flow",
        "* node 0: the environment, every held value and ambient",
    ]
    for number, pad in enumerate(answer["pads"], start=1):
        lines.append(f"* node {number}: {pad_name(pad).translate(_CONTROL)}")
    if network is None:
        lines.append("* no network: the pads are too much alike for the accuracy asked for")
    else:
        lines += _resistors(network, float(factor))
    return ("\n".join(lines) + "\n").encode()


def _resistors(network: dict[str, Any], factor: float) -> list[str]:
    """Lines of resistors. factor: of the unit of the list to that of the answer."""
    count = len(network["to_environment"])
    pairs = [(i, j) for i in range(count) for j in range(i + 1, count)]
    conductances = [network["between"][pair] for pair in pairs] + list(network["to_environment"])
    bounds = [network["between_error_bound"][pair] for pair in pairs] + list(network["to_environment_error_bound"])
    nodes = [(i + 1, j + 1) for i, j in pairs] + [(i + 1, 0) for i in range(count)]
    lines, largest, left_out = [], 0.0, 0
    for (first, second), conductance, bound in zip(nodes, conductances, bounds, strict=True):
        found = resistance(float(conductance), float(bound))
        if found is None:
            left_out += 1
            continue
        value, error = found
        largest = max(largest, error / abs(value))
        lines.append(f"R{first}_{second} {first} {second} {factor * value!r}")
    head = [f"* no value is further off than {largest:.1e} of itself"]
    if network["negative"]:
        head.append(f"* {network['negative']} of them are negative: part of an exact equivalent all the same")
    if left_out:
        head.append(f"* left out: {left_out} whose conductance is zero within its bound")
    return head + lines


def count_negative(between: Any, to_environment: Any) -> int:
    """How many resistors are negative."""
    return int((np.triu(between, 1) < 0).sum() + (np.asarray(to_environment) < 0).sum())
