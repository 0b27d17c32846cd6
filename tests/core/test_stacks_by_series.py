"""Stacks against series that share nothing with the core: a double cosine series, and a handbook's flux channel."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray

from service.core import FaceMap, Inflow, Layer, Pad, Patch, Rectangle, influence, solve
from service.core.problem import Body
from tests.core.bodies import all_insulated, film
from tests.core.reference.cosine_series import CosineSeries

FloatArray = NDArray[np.float64]

# Layers (thickness, conductivities, contact below) from the film up: those of the published case I04, but the
# conductivities in plane of the core are in one ratio.
PUBLISHED = (
    (0.2, (3.0, 3.0, 3.0), math.inf),
    (0.3, (1.0, 2.0, 0.5), math.inf),
    (0.1, (10.0, 10.0, 10.0), 4.0),
)
IN_ONE_RATIO = tuple((t, (kx, 2 * kx, kz), contact) for t, (kx, _, kz), contact in PUBLISHED)
SECTION = (1.0, 0.8)
FIRST, SECOND = (0.2, 0.6, 0.3, 0.5), (0.7, 0.9, 0.1, 0.3)
INFLOWS = ((FIRST, 3.0), (SECOND, -1.0))


def stack_of(layers: tuple[tuple[float, tuple[float, float, float], float], ...]) -> Body:
    data = FaceMap.patches(SECTION, 0.0, [Patch(Rectangle(*pad), density) for pad, density in INFLOWS])
    return Body.stack(
        SECTION,
        [Layer(*layer) for layer in layers],
        all_insulated(z_low=film(5.0, 0.0), z_high=Inflow(data)),
    )


def test_series_gives_the_published_values_of_a_stack() -> None:
    """Cases I04-stack-identities and I05-reciprocity: a contact of 4 below the top layer, a film of 5 below all.

    The middle layer conducts along y twice as well as along x and the others do not, so that the core has no say.
    """
    series = CosineSeries(SECTION, PUBLISHED, 5.0, 400)
    inside = np.array([(0.5, 0.4, 0.35)])
    assert series.potential(INFLOWS, inside)[0] == pytest.approx(0.14309534727777, abs=1e-13)
    # Per unit flow into the first pad, 12.5 on an area of 0.08; what 400 terms leave out is of the order of 1e-8.
    assert series.mean([(FIRST, 12.5)], SECOND) == pytest.approx(1.33891988751791, abs=2e-7)


def test_field_below_the_top_is_that_of_the_cosine_series() -> None:
    """At 0.05 below the pads the terms left out are below exp(-400 pi 0.05) = 1e-27."""
    places = np.array([(x, y, z) for x, y in ((0.5, 0.4), (0.21, 0.29), (0.0, 0.8)) for z in (0.0, 0.1, 0.35, 0.55)])
    series = CosineSeries(SECTION, IN_ONE_RATIO, 5.0, 400)
    solution = solve(stack_of(IN_ONE_RATIO))
    found = solution.field_at(places, tolerance=1e-10 * solution.span)
    wanted = series.potential(INFLOWS, places)
    assert np.abs(found.potential - wanted).max() <= found.potential_bound + 1e-13
    assert found.potential_bound < 1e-10 * solution.span


def test_influence_of_pads_is_that_of_the_cosine_series() -> None:
    """What is left out falls as the cube of the number of terms; two lengths of the series say how much it is."""
    pads = [Pad("z_high", Rectangle(*where)) for where in (FIRST, SECOND)]
    matrix = influence(stack_of(IN_ONE_RATIO), pads, tolerance=1e-9)
    for i, over in enumerate((FIRST, SECOND)):
        for j, into in enumerate((FIRST, SECOND)):
            density = 1 / ((into[1] - into[0]) * (into[3] - into[2]))
            short, long = (
                CosineSeries(SECTION, IN_ONE_RATIO, 5.0, terms).mean([(into, density)], over) for terms in (500, 1000)
            )
            assert abs(matrix.mean[i, j] - long) <= abs(long - short)
            assert abs(long - short) < 1e-5 * matrix.mean[i, i]


# Layers of a handbook: a chip's flux channel of two materials over a film. Half sides of the source a, b and of the
# channel c, d; thicknesses t1 (under the source) and t2; conductivities k1, k2; film h.
CHANNELS = {
    "copper on a poor plate": (0.005, 0.005, 0.02, 0.02, 0.002, 0.01, 390.0, 20.0, 500.0),
    "thin skin on copper": (0.01, 0.0025, 0.04, 0.02, 0.0001, 0.005, 0.25, 390.0, 2000.0),
    "wide source, strong film": (0.01, 0.01, 0.02, 0.02, 0.001, 0.001, 150.0, 1.2, 50000.0),
}


@pytest.mark.parametrize("name", CHANNELS)
def test_mean_rise_of_a_pad_on_a_compound_plate_is_the_handbooks(name: str) -> None:
    """Spreading resistance of a rectangular source on a compound rectangular flux channel.

    Yovanovich, Muzychka and Culham, J. Thermophysics and Heat Transfer 13 (1999) 495, formulas from memory.
    """
    a, b, c, d, t1, t2, k1, k2, h = CHANNELS[name]
    source = Rectangle(c - a, c + a, d - b, d + b)
    body = Body.stack(
        (2 * c, 2 * d),
        [Layer(t2, (k2, k2, k2)), Layer(t1, (k1, k1, k1))],
        all_insulated(z_low=film(h, 0.0)),
    )
    found = influence(body, [Pad("z_high", source)], tolerance=1e-9)
    values = [channel_resistance(CHANNELS[name], terms) for terms in (256, 512, 1024)]
    # The sides are in whole ratios, so that the rest is a series in 1 / terms, beginning with its square.
    once = [(4 * fine - coarse) / 3 for coarse, fine in pairwise(values)]
    wanted = (8 * once[1] - once[0]) / 7
    assert abs(wanted - once[1]) < 1e-6 * wanted
    assert found.mean[0, 0] == pytest.approx(wanted, abs=abs(wanted - once[1]))


def channel_resistance(channel: tuple[float, ...], terms: int) -> float:
    """The published series: one-dimensional resistance, two single sums and a double one."""
    a, b, c, d, t1, t2, k1, k2, h = channel
    deltas: FloatArray = math.pi / c * np.arange(1.0, terms + 1)
    lambdas: FloatArray = math.pi / d * np.arange(1.0, terms + 1)
    betas = np.sqrt(deltas[:, None] ** 2 + lambdas**2)
    kappa = k2 / k1
    alpha = (1 - kappa) / (1 + kappa)

    def phi(zeta: FloatArray) -> FloatArray:
        rho = (zeta + h / k2) / (zeta - h / k2)
        # Numerator and denominator over exp(2 zeta (2 t1 + t2)), so that nothing overflows.
        first, both, below = np.exp(-2 * zeta * t2), np.exp(-2 * zeta * (t1 + t2)), np.exp(-2 * zeta * t1)
        plus = alpha * first + both + rho * (1 + alpha * below)
        minus = alpha * first - both + rho * (1 - alpha * below)
        return plus / minus

    across = np.sin(a * deltas) ** 2, np.sin(b * lambdas) ** 2
    along_x = float((across[0] / deltas**3 * phi(deltas)).sum()) / (2 * a**2 * c * d * k1)
    along_y = float((across[1] / lambdas**3 * phi(lambdas)).sum()) / (2 * b**2 * c * d * k1)
    both = np.outer(across[0] / deltas**2, across[1] / lambdas**2) / betas * phi(betas)
    straight = (t1 / k1 + t2 / k2 + 1 / h) / (4 * c * d)
    return straight + along_x + along_y + float(both.sum()) / (a**2 * b**2 * c * d * k1)
