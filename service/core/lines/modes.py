"""A finite line at long times: a handful of eigenfunctions.

    phi_m(x) = cos(beta_m x / l - theta_m),   tan(theta_m) = Bi_low / beta_m

which is the cosine of an insulated line and the sine of a held one. A response is
sum over m of c_m phi_m(x) exp(-(beta_m / l)^2 t), with c_m the eigen-integral of what drives the line.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import spherical_jn

from service.core.lines.eigenvalues import roots
from service.core.lines.line import SLOPE, VALUE, Drive, Line, Order, WallDrive, wall_distance
from service.core.profiles import Profiles

FloatArray = NDArray[np.float64]

# At t / l^2 = images.LATEST the first mode left out is below exp(-(30 pi)^2 * 0.006) = 7e-24.
MODE_COUNT = 30


@dataclass(frozen=True, eq=False)
class Modes:
    """Eigenfunctions of a line, all arrays of shape (count,).

    wave_numbers: beta / l. norm: integral of phi^2 over the scaled length.
    cosine_low, sine_low: of theta at the low end; cosine_high, sine_high: of the mirrored angle at the high end.
    parity: (-1)^m, which turns the mirrored eigenfunction into the eigenfunction.
    """

    line: Line
    wave_numbers: FloatArray
    norm: FloatArray
    cosine_low: FloatArray
    sine_low: FloatArray
    cosine_high: FloatArray
    sine_high: FloatArray
    parity: FloatArray

    @property
    def rates(self) -> FloatArray:
        """Decay rates in time, (beta / l)^2."""
        return self.wave_numbers**2

    def at(self, coordinates: FloatArray, order: Order) -> FloatArray:
        """Eigenfunctions (VALUE) or their slopes (SLOPE) at places, shape (n_points, count).

        Counted from the nearer end, so that a place next to a held face keeps its digits.
        """
        low = wall_distance(self.line, coordinates, high=False)[:, None]
        high = wall_distance(self.line, coordinates, high=True)[:, None]
        from_low = low <= high
        cosine = np.where(from_low, self.cosine_low, self.cosine_high * self.parity)
        sine = np.where(from_low, self.sine_low, self.sine_high * self.parity)
        phase = self.wave_numbers * np.minimum(low, high)
        if order == VALUE:
            return cosine * np.cos(phase) + sine * np.sin(phase)
        slope = self.wave_numbers * (sine * np.cos(phase) - cosine * np.sin(phase))
        return np.where(from_low, slope, -slope)

    def over(self, low: FloatArray, high: FloatArray) -> FloatArray:
        """Integrals of the eigenfunctions over intervals, in scaled length, shape (n_intervals, count)."""
        half = 0.5 * (high - low)[:, None] * self.line.scale
        return 2 * half * np.sinc(self.wave_numbers * half / math.pi) * self.at(0.5 * (low + high), VALUE)


@lru_cache(maxsize=2048)
def modes_of(line: Line, count: int) -> Modes:
    """The first `count` eigenfunctions of a finite line."""
    biot_low, biot_high = line.biot_numbers
    beta = roots(biot_low, biot_high, count)
    cosine_low, sine_low = _angle(beta, biot_low)
    cosine_high, sine_high = _angle(beta, biot_high)
    # integral of phi^2 = l/2 (1 + Bi0 / (beta^2 + Bi0^2) + Bi1 / (beta^2 + Bi1^2)), and l for the constant one
    share = _norm_share(beta, biot_low) + _norm_share(beta, biot_high)
    norm = np.where(beta == 0.0, line.extent, 0.5 * line.extent * (1.0 + share))
    parity = np.where(np.arange(count) % 2 == 0, 1.0, -1.0)
    arrays = (beta / line.extent, norm, cosine_low, sine_low, cosine_high, sine_high, parity)
    for array in arrays:
        array.setflags(write=False)
    return Modes(line, *arrays)


def _angle(beta: FloatArray, biot: float) -> tuple[FloatArray, FloatArray]:
    if biot == math.inf:
        return np.zeros_like(beta), np.ones_like(beta)
    if biot == 0.0:
        return np.ones_like(beta), np.zeros_like(beta)
    hypotenuse = np.hypot(beta, biot)
    return beta / hypotenuse, biot / hypotenuse


def _norm_share(beta: FloatArray, biot: float) -> FloatArray:
    if biot in (0.0, math.inf):
        return np.zeros_like(beta)
    return np.asarray(biot / (beta * beta + biot * biot))


@lru_cache(maxsize=4096)
def eigen_integrals(line: Line, drive: Drive, count: int) -> FloatArray:
    """Coefficients c_m of what drives the line, shape (count, n_profiles); one column for a driven end.

    For profiles the integral of profile times eigenfunction over the norm, in closed form piece by piece; for a
    driven end the eigenfunction's value or slope there over the norm. The array is read-only and shared.
    """
    modes = modes_of(line, count)
    if isinstance(drive, WallDrive):
        coefficients = (_end_strength(modes, drive) / modes.norm)[:, None]
    else:
        coefficients = _profile_integrals(modes, drive) / modes.norm[:, None]
    coefficients.setflags(write=False)
    return coefficients


def _end_strength(modes: Modes, drive: WallDrive) -> FloatArray:
    film = modes.line.film_high if drive.high else modes.line.film_low
    sign = modes.parity if drive.high else np.ones_like(modes.parity)
    cosine = modes.cosine_high if drive.high else modes.cosine_low
    if film == math.inf:
        return sign * modes.wave_numbers
    return sign * cosine * (film if film > 0 else 1.0)


def _profile_integrals(modes: Modes, profiles: Profiles) -> FloatArray:
    line = modes.line
    knots = np.minimum(profiles.knots, line.length)
    total = modes.over(knots[:-1], knots[1:]).T @ (0.5 * (profiles.left + profiles.right))
    rise = 0.5 * (profiles.right - profiles.left)
    if rise.any():
        # integral of (x - middle) cos over a piece: the spherical Bessel function of order 1
        middle, half = 0.5 * (knots[1:] + knots[:-1]), 0.5 * line.scale * np.diff(knots)
        phase = modes.wave_numbers[:, None] * half
        odd = 2 * half * _bessel_over_wave(phase) / np.where(modes.wave_numbers == 0, 1.0, modes.wave_numbers)[:, None]
        total = total + (modes.at(middle, SLOPE).T * odd) @ rise
    return total if profiles.bends is None else total + _bend_integrals(modes, profiles.bends, knots)


def _bend_integrals(modes: Modes, bends: FloatArray, knots: FloatArray) -> FloatArray:
    """Integrals of the bends of curved pieces times the eigenfunctions.

    P_k times cos(y s + phase) over s from -1 to 1 is 2 j_k(y) cos(phase + k pi / 2), j_k the spherical Bessel function.
    """
    middle, half = 0.5 * (knots[1:] + knots[:-1]), 0.5 * modes.line.scale * np.diff(knots)
    waves = np.where(modes.wave_numbers == 0, 1.0, modes.wave_numbers)[:, None]
    # cos(phase) and -sin(phase) at the middle of each piece, (n_modes, n_pieces)
    even, odd = modes.at(middle, VALUE).T, modes.at(middle, SLOPE).T / waves
    turns = (even, odd, -even, -odd)
    moments = [
        2 * half * spherical_jn(k, modes.wave_numbers[:, None] * half) * turns[k % 4] for k in range(bends.shape[0] + 2)
    ]
    total = np.zeros((even.shape[0], bends.shape[2]))
    for k, weights in enumerate(bends):
        total += (moments[k + 2] - moments[k]) @ weights
    return total


def _bessel_over_wave(phase: FloatArray) -> FloatArray:
    """(sin y - y cos y) / y^2, by its power series where the difference would cancel."""
    small = np.abs(phase) < 0.3
    y = np.where(small, 1.0, phase)
    square = np.where(small, phase, 0.0) ** 2
    nested = 1 - square / 10 * (1 - square / 28 * (1 - square / 54 * (1 - square / 88)))
    series = np.where(small, phase, 0.0) / 3 * nested
    return np.where(small, series, (np.sin(y) - y * np.cos(y)) / (y * y))
