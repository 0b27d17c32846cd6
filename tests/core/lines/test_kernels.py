"""The functions an end answers with, against their definitions in forty digits."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from service.core.lines import kernels

PLACES = [(0.0, 1e-3), (1e-9, 1e-3), (0.3, 0.1), (2e-3, 1e-3), (0.05, 0.07)]
FILMS = [1e-12, 1e-9, 1e-3, 0.7, 40.0, 1e4, 1e9]


def repeated_erfc(order: int, w: mpmath.mpf) -> mpmath.mpf:
    """i^n erfc(w) by its integral (Abramowitz and Stegun 7.2.3, from memory)."""
    if order == -1:
        return 2 / mpmath.sqrt(mpmath.pi) * mpmath.exp(-w * w)
    if order == 0:
        return mpmath.erfc(w)
    kernel = lambda x: (x - w) ** order / mpmath.factorial(order) * mpmath.exp(-x * x)  # noqa: E731
    return 2 / mpmath.sqrt(mpmath.pi) * mpmath.quad(kernel, [w, w + 1, w + 4, w + 12])


def end_function(order: int, distance: float, root_time: float, film: float) -> mpmath.mpf:
    """K_n by K_(n+1) = (2 g_n - K_n) / H from K_0, in enough digits for the differences."""
    w, h, t = mpmath.mpf(distance) / (2 * mpmath.mpf(root_time)), mpmath.mpf(film), mpmath.mpf(root_time)
    value = mpmath.exp(h * distance + h * h * t * t) * mpmath.erfc(w + h * t)
    if order == -1:
        return repeated_erfc(-1, w) / (2 * t) - h * value
    for n in range(order):
        value = ((2 * t) ** n * repeated_erfc(n, w) - value) / h
    return value


@pytest.mark.parametrize("film", FILMS)
@pytest.mark.parametrize("order", [-1, 0, 1, 2])
def test_end_functions_keep_their_digits_for_every_film(order: int, film: float) -> None:
    for distance, root_time in PLACES:
        found = kernels.film_part(order, np.array([distance]), np.array([root_time]), film)[0]
        with mpmath.workdps(60):
            expected = float(end_function(order, distance, root_time, film))
            # What rounding refers to: the same function of an insulated end.
            scale = float((2 * root_time) ** order * repeated_erfc(order, mpmath.mpf(distance) / (2 * root_time)))
        assert found == pytest.approx(expected, rel=1e-12, abs=2e-14 * scale)


@pytest.mark.parametrize("film", FILMS)
@pytest.mark.parametrize("order", [-1, 0, 1])
def test_jump_on_a_film_end_and_its_image_do_not_cancel(order: int, film: float) -> None:
    for distance, root_time in PLACES:
        found = kernels.with_its_image(order, np.array([distance]), np.array([root_time]), film)[0]
        with mpmath.workdps(60):
            expected = float(film * end_function(order + 1, distance, root_time, film))
        # Relative to itself, however small the film makes it.
        assert found == pytest.approx(expected, rel=1e-11, abs=1e-300)
