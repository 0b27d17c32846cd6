"""The line of a stack against a plain linear system of its layers in sixty digits, and against mpmath's inversion."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pytest
import scipy.linalg
from numpy.typing import NDArray

from service.core import time_error
from service.core.lines import stack_laplace
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE, Drive, Order, WallDrive
from service.core.lines.places import Places
from service.core.lines.stack import StackLine
from service.core.lines.time_response import respond
from service.core.profiles import Profiles
from tests.core.reference import stack_line as exact
from tests.core.reference.kernels import Number, arithmetic

FloatArray = NDArray[np.float64]

ORDERS: dict[str, Order] = {"values": VALUE, "flows": SLOPE, "integrals": PRIMITIVE}
FILMS = (0.0, 1e-6, 0.3, 1e6, math.inf)

# Heights are sums of this, so that they are the same numbers for both sides.
GRAIN = 2.0**-40

# What mpmath's inversion leaves where the answer is zero.
REFERENCE_ERROR = 1e-30


@dataclass(frozen=True)
class Sample:
    """A random line, twice: as the core has it, and for the reference cut where its profile jumps."""

    line: StackLine
    cut: exact.LayeredLine
    drives: dict[str, tuple[Drive, exact.Drive]]
    places: FloatArray

    def asked(self, order: Order) -> Places:
        """Places of the core, neighbouring ones as intervals."""
        if order == PRIMITIVE:
            return Places(self.places[:-1], PRIMITIVE, self.places[1:])
        return Places(self.places, order)

    def read(self, answer: exact.Answer, order: Order) -> list[Number]:
        """The same of the reference."""
        if order == PRIMITIVE:
            return [answer.integral(*pair) for pair in pairwise(self.places)]
        return [(answer.value if order == VALUE else answer.slope)(z) for z in self.places]

    def start(self) -> exact.Answer:
        """The profile itself as an answer."""
        held = self.drives["profile"][1].held
        heights = self.cut.heights()
        return exact.Answer(
            [
                exact.Layer(low, high, arithmetic.mpf(1), arithmetic.mpf(1), arithmetic.mpf(value), 0, 0)
                for (low, high), value in zip(pairwise(heights), held, strict=True)
            ]
        )


def sample(seed: int) -> Sample:
    """Two to six layers from a millionth to one thick, conductivities over four decades, contacts over eight."""
    random = np.random.default_rng([31, seed])
    count = int(random.integers(2, 7))
    thickness = [grained(10 ** random.uniform(-6, 0)) for _ in range(count)]
    k, c = (list(map(float, 10 ** random.uniform(-2, 2, count))) for _ in range(2))
    contacts = [float(random.choice([math.inf, 10 ** random.uniform(-3, 5)])) for _ in range(count - 1)]
    films = float(random.choice(FILMS)), float(random.choice(FILMS))
    line = StackLine.of(thickness, k, c, contacts, *films)
    # Another jump within each of two layers.
    extra = {layer: grained(random.uniform(0.2, 0.8) * thickness[layer]) for layer in random.integers(0, count, 2)}
    pieces = [(layer, part) for layer in range(count) for part in parts_of(thickness[layer], extra.get(layer))]
    held = [float(value) for value in random.choice([0.0, 1.0, -2.0, 0.5], len(pieces))]
    joined = [math.inf if first == second else contacts[first] for (first, _), (second, _) in pairwise(pieces)]
    cut = exact.LayeredLine(
        [part for _, part in pieces],
        [k[layer] for layer, _ in pieces],
        [c[layer] for layer, _ in pieces],
        joined,
        *films,
    )
    knots = np.array([float(height) for height in cut.heights()])
    profile = Profiles(knots, np.array(held)[:, None], np.array(held)[:, None])
    inside = [grained(random.uniform(0, 1) * (high - low)) + low for low, high in pairwise(line.heights)]
    drives: dict[str, tuple[Drive, exact.Drive]] = {
        "low end": (WallDrive(False), exact.Drive("low")),
        "high end": (WallDrive(True), exact.Drive("high")),
        "profile": (profile, exact.Drive(held=held)),
    }
    return Sample(line, cut, drives, np.unique(np.concatenate([line.heights, inside])))


def grained(length: float) -> float:
    """A length as a multiple of GRAIN."""
    return max(round(length / GRAIN), 2) * GRAIN


def parts_of(thickness: float, at: float | None) -> list[float]:
    """A layer, or its two parts."""
    return [thickness] if at is None else [at, thickness - at]


@pytest.mark.parametrize("seed", range(10))
def test_transform_solves_the_linear_system_of_the_layers(seed: int) -> None:
    found = sample(seed)
    # Waves that span the whole stack, and such that fade within the thinnest layer; places on the path of inversion.
    slow = 1 / found.line.extent**2
    for s in (1e-3 * slow, 1e4 * slow, 1e9 * slow, slow * (1 + 2j), 1e6 * slow * (-4 + 3j)):
        for name, (drive, given) in found.drives.items():
            answer = exact.solve_line(found.cut, given, arithmetic.mpmathify(s))
            for what, order in ORDERS.items():
                values = stack_laplace.transform(found.line, drive, found.asked(order), np.array([s]))[:, 0, 0]
                wanted = found.read(answer, order)
                # Within a layer the slopes of a profile are those of waves from both of its ends, which may cancel.
                least = float(max(map(abs, wanted))) if name == "profile" else 0.0
                compare(values, wanted, least, f"{what}, {name} at s = {s:.3g}")


@pytest.mark.parametrize("seed", range(10))
def test_departure_is_the_transform_less_the_profile_and_keeps_its_digits(seed: int) -> None:
    found = sample(seed)
    drive, given = found.drives["profile"]
    assert isinstance(drive, Profiles)
    slow = 1 / found.line.extent**2
    start = found.read(found.start(), VALUE)
    for s in (1e4 * slow, 1e9 * slow, 1e6 * slow * (-4 + 3j)):
        answer = exact.solve_line(found.cut, given, arithmetic.mpmathify(s))
        for order in (VALUE, SLOPE):
            values = stack_laplace.departure(found.line, drive, found.asked(order), np.array([s]))[:, 0, 0]
            wanted = found.read(answer, order)
            if order == VALUE:
                wanted = [value - held / arithmetic.mpmathify(s) for value, held in zip(wanted, start, strict=True)]
            compare(values, wanted, 1e-3 * float(max(map(abs, wanted))), f"order {order} at s = {s:.3g}")


def compare(found: NDArray[np.inexact], wanted: list[Number], least: float, what: str) -> None:
    """To 1e-11 of each number or of `least`, and down to what has faded to nothing."""
    for value, number in zip(found, wanted, strict=True):
        off = abs(arithmetic.mpmathify(complex(value)) - number)
        assert off <= 1e-11 * max(abs(number), least) + 1e-290, what


@pytest.mark.parametrize("seed", range(3))
def test_answer_at_times_is_the_inverse_of_the_transform(seed: int) -> None:
    """Off by no more than what every bound allows for rounding: a part of what the answer is summed from.

    A front that has not come yet may be off by what is allowed once it has come; the rule of the inversion is.
    """
    found = sample(seed)
    times = found.line.extent**2 * np.geomspace(1e-9, 10.0, 41)

    def read(answer: exact.Answer) -> list[Number]:
        return [number for order in ORDERS.values() for number in found.read(answer, order)]

    for name, (drive, given) in found.drives.items():
        answers = [respond(found.line, drive, found.asked(order), times) for order in ORDERS.values()]
        for index in (0, 28):
            wanted = iter(exact.in_time(found.cut, given, read, float(times[index])))
            for what, answer in zip(ORDERS, answers, strict=True):
                assert answer.carried is not None
                carried = answer.carried[:, index:, 0].max(axis=1)
                for value, size in zip(answer.total[:, index, 0], carried, strict=True):
                    number = next(wanted)
                    allowed = time_error.ROUNDING * max(abs(float(number)), float(size))
                    assert abs(number - float(value)) <= allowed + REFERENCE_ERROR, (
                        f"{what}, {name} at t = {times[index]:.3g}"
                    )


@pytest.mark.parametrize("seed", range(20))
def test_slow_rates_are_below_the_true_ones_and_not_far(seed: int) -> None:
    line = sample(seed).line
    lower_first, lower_second = line.slow_rates
    first, second = rates_of_cells(line)
    if line.film_low == line.film_high == 0.0:
        assert lower_first == 0.0
        first = second
    # The sum of 1 / rate over all modes: at most so many layers are as slow as the slowest, and each adds pi^2 / 6.
    assert first / (2 * len(line.thickness)) < lower_second < first


def rates_of_cells(line: StackLine) -> tuple[float, float]:
    """First two decay rates of sixty cells a layer with resistances between them; 0 first where nothing leaves.

    They are squares of the singular values of a matrix of two diagonals, which are exact to rounding however far the
    layers differ (Demmel and Kahan 1990); the cells cost about a ten-thousandth.
    """
    cells = 60
    half = np.repeat(np.array(line.thickness) / np.array(line.conductivity), cells) / (2 * cells)
    amount = np.repeat(np.array(line.thickness) * np.array(line.capacity), cells) / cells
    between = half[:-1] + half[1:]
    between[cells - 1 :: cells] += 1 / np.array(line.contacts)
    ends = [math.inf if film == 0.0 else 1 / film for film in (line.film_low, line.film_high)]
    resistance = np.concatenate([[ends[0] + half[0]], between, [ends[1] + half[-1]]])
    count = amount.size
    step = np.zeros((count + 1, count))
    step[np.arange(count), np.arange(count)] = 1 / np.sqrt(resistance[:-1] * amount)
    step[np.arange(1, count + 1), np.arange(count)] = -1 / np.sqrt(resistance[1:] * amount)
    values = np.sort(scipy.linalg.svdvals(step)) ** 2
    return float(values[0]), float(values[1])
