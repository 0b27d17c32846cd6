"""Taylor coefficients over boxes: what a function and its derivatives can be anywhere in them, as intervals.

A jet holds c_k with f(x + s) = c_0 + c_1 s + c_2 s^2 + ... for every x in a box, each c_k as an interval that encloses
it over the whole box; k! c_k then encloses the k-th derivative there. Arrays of boxes are carried at once. The
recurrences are those of automatic differentiation, with interval numbers in place of numbers (Moore, Interval
Analysis, 1966, chapter 11). Rounding is not directed outwards; who uses an enclosure leaves room for it.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import reduce

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

# An argument of abs, min or max that crosses zero by less than this part of its size only touches it: an end of the
# box was put on the kink, to rounding.
TOUCHES = 1e-13


@dataclass(frozen=True, eq=False)
class Interval:
    """All numbers from low to high, elementwise; an end may be infinite."""

    low: FloatArray
    high: FloatArray

    @classmethod
    def of(cls, value: float) -> Interval:
        """One number."""
        number = np.array(float(value))
        return cls(number, number)

    @property
    def is_zero(self) -> bool:
        """Whether it is 0 in every box."""
        return not (self.low.any() or self.high.any())

    @property
    def size(self) -> FloatArray:
        """Largest absolute value; infinite where nothing is known."""
        size = np.maximum(np.abs(self.low), np.abs(self.high))
        return np.where(np.isnan(size), math.inf, size)

    def __add__(self, other: Interval) -> Interval:
        return Interval(self.low + other.low, self.high + other.high)

    def __sub__(self, other: Interval) -> Interval:
        return Interval(self.low - other.high, self.high - other.low)

    def __neg__(self) -> Interval:
        return Interval(-self.high, -self.low)

    def __mul__(self, other: Interval) -> Interval:
        products = [self.low * other.low, self.low * other.high, self.high * other.low, self.high * other.high]
        return Interval(reduce(np.minimum, products), reduce(np.maximum, products))

    def times(self, factor: float) -> Interval:
        """A multiple by a number >= 0."""
        return Interval(factor * self.low, factor * self.high)

    def where(self, chosen: NDArray[np.bool_], other: Interval) -> Interval:
        """This one where chosen, the other elsewhere."""
        return Interval(np.where(chosen, self.low, other.low), np.where(chosen, self.high, other.high))


ZERO, ONE = Interval.of(0.0), Interval.of(1.0)
UNKNOWN = Interval(np.array(-math.inf), np.array(math.inf))


@dataclass(frozen=True, eq=False)
class Jet:
    """Taylor coefficients c_0, c_1, ... as far as they are not zero, and the order to which they are wanted."""

    coefficients: tuple[Interval, ...]
    order: int

    @classmethod
    def constant(cls, value: float, order: int) -> Jet:
        """A number."""
        return cls((Interval.of(value),), order)

    @classmethod
    def box(cls, low: FloatArray, high: FloatArray, order: int, *, varies: bool) -> Jet:
        """A coordinate in boxes from low to high, and whether it is the one that is differentiated along."""
        coordinate = Interval(np.asarray(low, dtype=float), np.asarray(high, dtype=float))
        return cls((coordinate, ONE) if varies else (coordinate,), order)

    def __getitem__(self, k: int) -> Interval:
        return self.coefficients[k] if k < len(self.coefficients) else ZERO

    @property
    def value(self) -> Interval:
        """The function itself over each box."""
        return self.coefficients[0]

    def __add__(self, other: Jet) -> Jet:
        count = max(len(self.coefficients), len(other.coefficients))
        return Jet(tuple(self[k] + other[k] for k in range(count)), self.order)

    def __sub__(self, other: Jet) -> Jet:
        return self + -other

    def __neg__(self) -> Jet:
        return Jet(tuple(-c for c in self.coefficients), self.order)

    def __mul__(self, other: Jet) -> Jet:
        count = min(len(self.coefficients) + len(other.coefficients) - 1, self.order + 1)
        return Jet(tuple(_convolved(self, other, k) for k in range(count)), self.order)

    def __truediv__(self, other: Jet) -> Jet:
        return self * other.reciprocal()

    def reciprocal(self) -> Jet:
        """1 over the function; nothing is known in a box where that is not finite."""
        a = self.value
        crosses = (a.low <= 0) & (a.high >= 0)
        with np.errstate(divide="ignore"):
            first = UNKNOWN.where(crosses, Interval(1 / a.high, 1 / a.low))
        return self._recurrence(first, lambda k, c: -(first * _sum(self[j] * c[k - j] for j in range(1, k + 1))))

    def square(self) -> Jet:
        """The function times itself, whose value is not negative."""
        product = self * self
        low, high = np.abs(self.value.low), np.abs(self.value.high)
        crosses = (self.value.low <= 0) & (self.value.high >= 0)
        least = np.where(crosses, 0.0, np.minimum(low, high) ** 2)
        return Jet((Interval(least, np.maximum(low, high) ** 2), *product.coefficients[1:]), self.order)

    def whole_power(self, exponent: int) -> Jet:
        """A power with a whole exponent, by repeated squaring."""
        if exponent < 0:
            return self.whole_power(-exponent).reciprocal()
        if exponent == 0:
            return Jet.constant(1.0, self.order)
        if exponent == 1:
            return self
        half = self.whole_power(exponent // 2).square()
        return half * self if exponent % 2 else half

    def real_power(self, exponent: float) -> Jet:
        """A power of a function that is not negative: a c' = exponent a' c."""
        a = self.value
        with np.errstate(divide="ignore", invalid="ignore"):
            ends = np.maximum(a.low, 0.0) ** exponent, a.high**exponent
            first = Interval(np.minimum(*ends), np.maximum(*ends))
        first = UNKNOWN.where(a.low < 0, first) if exponent < 0 else UNKNOWN.where(a.high < 0, first)
        over = Jet((a,), self.order).reciprocal().value

        def following(k: int, c: Sequence[Interval]) -> Interval:
            terms = (_scaled(self[j] * c[k - j], exponent * j - (k - j)) for j in range(1, k + 1))
            return (over * _sum(terms)).times(1 / k)

        return self._recurrence(first, following)

    def exp(self) -> Jet:
        """c' = a' c."""
        with np.errstate(over="ignore"):
            first = Interval(np.exp(self.value.low), np.exp(self.value.high))
        return self._recurrence(first, lambda k, c: _sum((self[j] * c[k - j]).times(j / k) for j in range(1, k + 1)))

    def log(self) -> Jet:
        """c' = a' / a."""
        with np.errstate(divide="ignore", invalid="ignore"):
            first = Interval(np.log(self.value.low), np.log(self.value.high))
        return self._integrated(UNKNOWN.where(~(self.value.low > 0), first), self.reciprocal())

    def sin(self) -> Jet:
        """Sine."""
        return self._sine_and_cosine()[0]

    def cos(self) -> Jet:
        """Cosine."""
        return self._sine_and_cosine()[1]

    def sinh(self) -> Jet:
        """Hyperbolic sine."""
        grows, falls = self.exp(), (-self).exp()
        with np.errstate(over="ignore"):
            first = Interval(np.sinh(self.value.low), np.sinh(self.value.high))
        return (grows - falls)._halved(first)

    def cosh(self) -> Jet:
        """Hyperbolic cosine."""
        grows, falls = self.exp(), (-self).exp()
        a = self.value
        with np.errstate(over="ignore"):
            least = np.where((a.low <= 0) & (a.high >= 0), 1.0, np.minimum(np.cosh(a.low), np.cosh(a.high)))
            first = Interval(least, np.maximum(np.cosh(a.low), np.cosh(a.high)))
        return (grows + falls)._halved(first)

    def tanh(self) -> Jet:
        """c' = (1 - c^2) a'."""
        first = Interval(np.tanh(self.value.low), np.tanh(self.value.high))

        def following(k: int, c: Sequence[Interval]) -> Interval:
            known = Jet(tuple(c), self.order)
            slope = Jet.constant(1.0, self.order) - known.square()
            return _sum((self[j] * slope[k - j]).times(j / k) for j in range(1, k + 1))

        return self._recurrence(first, following)

    def atan(self) -> Jet:
        """c' = a' / (1 + a^2)."""
        first = Interval(np.arctan(self.value.low), np.arctan(self.value.high))
        return self._integrated(first, (Jet.constant(1.0, self.order) + self.square()).reciprocal())

    def asin(self) -> Jet:
        """c' = a' / sqrt(1 - a^2)."""
        with np.errstate(invalid="ignore"):
            first = Interval(np.arcsin(self.value.low), np.arcsin(self.value.high))
        return self._integrated(first, (Jet.constant(1.0, self.order) - self.square()).real_power(-0.5))

    def abs(self) -> Jet:
        """Absolute value; its derivatives are unknown in a box with a kink inside."""
        least, a = Interval(np.minimum(np.abs(self.value.low), np.abs(self.value.high)), self.value.size), self.value
        crosses = (a.low < 0) & (a.high > 0)
        value = Interval(np.where(crosses, 0.0, least.low), a.size)
        return _either(self, self, -self, value)

    def larger(self, other: Jet) -> Jet:
        """The larger of two functions."""
        a, b = self.value, other.value
        return _either(self - other, self, other, Interval(np.maximum(a.low, b.low), np.maximum(a.high, b.high)))

    def _halved(self, first: Interval) -> Jet:
        return Jet((first, *(c.times(0.5) for c in self.coefficients[1:])), self.order)

    def _sine_and_cosine(self) -> tuple[Jet, Jet]:
        sines, cosines = [_sine(self.value)], [_sine(self.value + Interval.of(math.pi / 2))]
        if len(self.coefficients) > 1:
            for k in range(1, self.order + 1):
                span = range(1, k + 1)
                sine = _sum((self[j] * cosines[k - j]).times(j / k) for j in span)
                cosine = -_sum((self[j] * sines[k - j]).times(j / k) for j in span)
                sines.append(sine)
                cosines.append(cosine)
        return Jet(tuple(sines), self.order), Jet(tuple(cosines), self.order)

    def _recurrence(self, first: Interval, following: Callable[[int, Sequence[Interval]], Interval]) -> Jet:
        found = [first]
        if len(self.coefficients) > 1:
            for k in range(1, self.order + 1):
                found.append(following(k, found))
        return Jet(tuple(found), self.order)

    def _integrated(self, first: Interval, slope: Jet) -> Jet:
        """The function whose derivative is `slope` times that of this one."""
        return self._recurrence(
            first, lambda k, _: _sum((self[j] * slope[k - j]).times(j / k) for j in range(1, k + 1))
        )


def _either(switch: Jet, above: Jet, below: Jet, value: Interval) -> Jet:
    """One function where a switch is above zero and another below; where it is both the derivatives are unknown."""
    room = TOUCHES * switch.value.size
    is_above, is_below = switch.value.low >= -room, switch.value.high <= room
    kinked = ~(is_above | is_below)
    count = max(len(above.coefficients), len(below.coefficients))
    if kinked.any() and count > 1:
        count = switch.order + 1
    rest = (above[k].where(is_above, below[k].where(is_below, UNKNOWN)) for k in range(1, count))
    return Jet((value, *rest), switch.order)


def _sum(terms: Iterable[Interval]) -> Interval:
    total: Interval | None = None
    for term in terms:
        if not term.is_zero:
            total = term if total is None else total + term
    return ZERO if total is None else total


def _scaled(interval: Interval, factor: float) -> Interval:
    return interval.times(factor) if factor >= 0 else (-interval).times(-factor)


def _convolved(a: Jet, b: Jet, k: int) -> Interval:
    first, last = max(0, k - len(b.coefficients) + 1), min(k, len(a.coefficients) - 1)
    return _sum(a[j] * b[k - j] for j in range(first, last + 1))


def _sine(x: Interval) -> Interval:
    ends = np.sin(x.low), np.sin(x.high)
    turn = 2 * math.pi
    wide = ~(x.high - x.low < turn)
    with np.errstate(invalid="ignore"):
        has_top = wide | (np.ceil((x.low - math.pi / 2) / turn) <= (x.high - math.pi / 2) / turn)
        has_bottom = wide | (np.ceil((x.low + math.pi / 2) / turn) <= (x.high + math.pi / 2) / turn)
    return Interval(np.where(has_bottom, -1.0, np.minimum(*ends)), np.where(has_top, 1.0, np.maximum(*ends)))
