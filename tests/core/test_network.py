"""Resistance networks against networks that were solved by hand, and their bounds against perturbed matrices."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from service.core.network import network, resistance


def exact_inverse(matrix: list[list[Fraction]]) -> list[list[Fraction]]:
    """Gauss and Jordan in fractions."""
    size = len(matrix)
    rows = [[*row, *(Fraction(int(i == j)) for j in range(size))] for i, row in enumerate(matrix)]
    for column in range(size):
        pivot = next(i for i in range(column, size) if rows[i][column])
        rows[column], rows[pivot] = rows[pivot], rows[column]
        rows[column] = [entry / rows[column][column] for entry in rows[column]]
        for other in range(size):
            if other != column:
                factor = rows[other][column]
                rows[other] = [a - factor * b for a, b in zip(rows[other], rows[column], strict=True)]
    return [row[size:] for row in rows]


def test_two_resistors_to_a_common_point_are_the_triangle_of_them() -> None:
    """Pads 1 and 2 reach a common point through 2 and 3 K/W, and that the environment through 6 K/W.

    Rises per flow by hand: 8, 9 and 6 between. The triangle of the star (Kennelly): with S = 2*3 + 3*6 + 6*2 = 36,
    the resistances are S/6 = 6 between the pads, S/3 = 12 from the first and S/2 = 18 from the second.
    """
    found = network(np.array([[8.0, 6.0], [6.0, 9.0]]), np.zeros((2, 2)))
    assert found is not None
    assert 1 / found.between[0, 1] == pytest.approx(6.0, rel=1e-14)
    assert 1 / found.to_environment == pytest.approx([12.0, 18.0], rel=1e-13)
    assert found.between[0, 0] == found.between[1, 1] == 0
    assert 0 < found.between_bound[0, 1] < 1e-13


def test_one_pad_has_one_resistor() -> None:
    found = network(np.array([[4.0]]), np.array([[0.1]]))
    assert found is not None
    assert found.to_environment == pytest.approx([0.25], rel=1e-15)
    # 1 / 3.9 - 1 / 4 is the most it can be off.
    assert 1 / 3.9 - 1 / 4 <= found.to_environment_bound[0] <= 1.01 * (1 / 3.9 - 1 / 4)


def test_resistors_put_together_are_found_again_within_their_bounds() -> None:
    """Rises of a random network in exact fractions; the network of them is the one they are from."""
    random = np.random.default_rng(5)
    size = 7
    between = [[Fraction(int(random.integers(1, 100)), 7) for _ in range(size)] for _ in range(size)]
    environment = [Fraction(int(random.integers(1, 50)), 3) for _ in range(size)]
    joined = [[(between[min(i, j)][max(i, j)] if i != j else Fraction(0)) for j in range(size)] for i in range(size)]
    balance = [[sum(joined[i], environment[i]) if i == j else -joined[i][j] for j in range(size)] for i in range(size)]
    rises = np.array([[float(entry) for entry in row] for row in exact_inverse(balance)])
    found = network(rises, 1e-16 * rises)
    assert found is not None
    for i in range(size):
        assert abs(found.to_environment[i] - float(environment[i])) <= found.to_environment_bound[i]
        for j in range(size):
            assert abs(found.between[i, j] - float(joined[i][j])) <= found.between_bound[i, j] + 1e-30
    assert found.between_bound.max() < 1e-11 * found.between.max()


def test_negative_resistors_are_kept() -> None:
    """A row of three pads whose ends see each other less than the middle one hands on: inverse by hand in fractions."""
    rises = [[Fraction(entry) for entry in row] for row in ((8, 6, 4), (6, 8, 6), (4, 6, 8))]
    conductances = exact_inverse(rises)
    assert conductances[0][2] > 0  # so the resistor between the ends is negative
    found = network(np.array(rises, dtype=float), np.zeros((3, 3)))
    assert found is not None
    assert found.between[0, 2] == pytest.approx(-float(conductances[0][2]), rel=1e-13)
    assert found.between[0, 2] < 0


def test_bound_covers_every_matrix_within_the_bound_and_is_nearly_reached() -> None:
    random = np.random.default_rng(11)
    points = random.uniform(0, 1, (12, 2))
    rises = 1 / (0.2 + np.linalg.norm(points[:, None] - points, axis=2))
    bound = 1e-5 * rises
    found = network(rises, bound)
    assert found is not None
    reached = 0.0
    for trial in range(400):
        signs = random.choice([-1.0, 1.0], rises.shape)
        if trial < 12:
            # The signs that move one entry of the inverse most.
            inverse = np.linalg.inv(rises)
            signs = np.sign(np.outer(inverse[trial], inverse[(trial + 1) % 12]))
        error = bound * 0.5 * (np.triu(signs) + np.triu(signs).T + np.triu(signs, 1) + np.triu(signs, 1).T)
        other = -np.linalg.inv(rises + np.clip(error, -bound, bound))
        off = np.abs(other - found.between)
        np.fill_diagonal(off, 0.0)
        assert (off <= found.between_bound + 1e-12).all()
        assert (np.abs(-other.sum(axis=1) - found.to_environment) <= found.to_environment_bound + 1e-12).all()
        reached = max(reached, float((off / np.where(found.between_bound > 0, found.between_bound, 1)).max()))
    assert reached > 0.3


def test_pads_too_much_alike_have_no_network() -> None:
    rises = np.array([[1.0, 1.0 - 1e-9], [1.0 - 1e-9, 1.0]])
    assert network(rises, np.full((2, 2), 1e-8)) is None
    assert network(np.ones((2, 2)), np.zeros((2, 2))) is None
    assert network(rises, np.full((2, 2), 1e-11)) is not None


def test_pads_of_very_different_size_have_a_network() -> None:
    rises = np.array([[1e9, 0.3], [0.3, 1.0]])
    found = network(rises, 1e-9 * rises)
    assert found is not None
    assert found.between[0, 1] == pytest.approx(0.3 / (1e9 - 0.09), rel=1e-12)


def test_resistance_of_a_conductance_that_may_be_zero_is_none() -> None:
    assert resistance(1e-9, 1e-9) is None
    assert resistance(0.0, 0.0) is None
    value, error = resistance(-0.5, 0.1) or (0.0, 0.0)
    # Between -1 / 0.4 and -1 / 0.6.
    assert value == -2.0
    assert error == pytest.approx(0.5, rel=1e-12)
