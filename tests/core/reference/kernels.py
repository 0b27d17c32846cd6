"""Heat kernels of a half line in high-precision arithmetic.

Everything here is written from the equations and shares no code with the solver core, so that agreement
with it means something. `y` is a distance along the line, `spread` is T = k t (length squared), and

    s0(y) = exp(-y^2 / 4T) / (2 sqrt(pi T)),   s1(y) = int_y^inf s0,   s2(y) = int_y^inf s1

are the responses of an endless line to a point, a step and a ramp at distance y. With a film of strength H
= h/k at the end of a half line the reflected responses need one function more,

    w(y) = exp(H y + H^2 T) erfc(y / (2 sqrt T) + H sqrt T) / 2

(Carslaw and Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, section 14.2).
"""

from __future__ import annotations

from typing import Any, TypeAlias

import mpmath

# 60 digits leave more than 20 after the worst cancellation: a film of Biot number 1e-9 at a distance of
# 1e-8 sides.
arithmetic = mpmath.mp.clone()
arithmetic.dps = 60
# mpmath carries no types; the name says what is meant.
Number: TypeAlias = Any

ZERO = arithmetic.mpf(0)
ONE = arithmetic.mpf(1)
HALF = ONE / 2
SQRT_PI = arithmetic.sqrt(arithmetic.pi)
# exp(-10.4^2) < 1e-46: beyond this argument the complementary error function is nothing.
FAR = arithmetic.mpf("10.4")


def scaled_complement(x: Number) -> Number:
    """exp(x^2) erfc(x) for x >= 0."""
    if x < FAR:
        return arithmetic.exp(x * x) * arithmetic.erfc(x)
    # Asymptotic series; its smallest term is about exp(-x^2).
    square = 2 * x * x
    term = total = ONE
    order = 1
    while abs(term) > arithmetic.eps:
        term = -term * order / square
        total += term
        order += 2
        if order > square:
            break
    return total / (x * SQRT_PI)


class Spread:
    """The kernels of one line at one time."""

    def __init__(self, spread: Number) -> None:
        self.root = arithmetic.sqrt(spread)
        self.spread = spread
        self.peak = 1 / (2 * SQRT_PI * self.root)

    def kernels(self, y: Number) -> tuple[Number, Number, Number]:
        """s0, s1 and s2 at distance y of either sign."""
        x = y / (2 * self.root)
        if x > FAR:
            return ZERO, ZERO, ZERO
        if x < -FAR:
            return ZERO, ONE, -y
        s0 = self.peak * arithmetic.exp(-x * x)
        s1 = HALF if y == 0 else arithmetic.erfc(x) / 2
        return s0, s1, 2 * self.spread * s0 - y * s1

    def film(self, y: Number, film: Number) -> Number:
        """w at distance y >= 0 for a film of strength H."""
        x = y / (2 * self.root)
        if x > FAR:
            return ZERO
        return arithmetic.exp(-x * x) * scaled_complement(x + film * self.root) / 2

    def reflected(self, y: Number, end: str, film: Number) -> tuple[Number, Number, Number]:
        """s0, s1 and s2 after one reflection at an end that is held (D), insulated (N) or has a film (R)."""
        s0, s1, s2 = self.kernels(y)
        if end == "N":
            return s0, s1, s2
        if end == "D":
            return -s0, -s1, -s2
        if s1 == 0 and s0 == 0:
            return ZERO, ZERO, ZERO
        w = self.film(y, film)
        # K(y) - 2 H int_0^inf exp(-H s) K(y + s) ds, worked out by parts for each kernel.
        return s0 - 2 * film * w, -s1 + 2 * w, -s2 + 2 * (s1 - w) / film
