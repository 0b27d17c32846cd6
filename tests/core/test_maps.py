"""Data over a face: what a map says where, and what it refuses."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.core import FaceMap, NotPhysical, Patch, Rectangle


def test_patches_stand_in_place_of_the_background() -> None:
    face_map = FaceMap.patches((4.0, 2.0), 1.0, [Patch(Rectangle(1.0, 2.0, 0.0, 1.0), 5.0)])
    values = face_map.at(np.array([0.5, 1.5, 3.0]), np.array([0.5, 1.5]))
    np.testing.assert_allclose(values, [[1, 1], [5, 1], [1, 1]], rtol=0, atol=1e-15)


def test_readings_are_bilinear_between_their_places() -> None:
    face_map = FaceMap.readings((2.0, 1.0), [0.0, 2.0], [0.0, 1.0], [[0.0, 1.0], [2.0, 5.0]])
    # 0.5 * 0.5 of each corner
    assert face_map.at(np.array([1.0]), np.array([0.5]))[0, 0] == pytest.approx(2.0, abs=1e-14)


def test_outermost_readings_are_held_to_the_edges_only_on_request() -> None:
    inner = ([0.5, 1.5], [0.0, 1.0], [[1.0, 1.0], [3.0, 3.0]])
    with pytest.raises(NotPhysical, match=r"readings reach from 0\.5 to 1\.5"):
        FaceMap.readings((2.0, 1.0), *inner)
    carried = FaceMap.readings((2.0, 1.0), *inner, extend=True)
    np.testing.assert_allclose(carried.at(np.array([0.0, 0.2, 2.0]), np.array([0.3]))[:, 0], [1, 1, 3], atol=1e-14)


def test_what_equals_the_reference_stays_exactly_zero() -> None:
    face_map = FaceMap.patches((1.0, 1.0), 30.1, [Patch(Rectangle(0.1, 0.4, 0.2, 0.7), 640.0)]).minus(30.1)
    outside = face_map.at(np.array([0.05, 0.9]), np.array([0.1, 0.9]))
    assert (outside == 0.0).all()


@pytest.mark.parametrize(
    ("make", "sentence"),
    [
        (lambda: FaceMap.uniform(math.nan), "not a finite number"),
        (lambda: FaceMap.patches((1, 1), 0, [Patch(Rectangle(0.5, 0.5, 0, 1), 1)]), "positive extent"),
        (lambda: FaceMap.patches((1, 1), 0, [Patch(Rectangle(0.5, 1.5, 0, 1), 1)]), "lie in the face"),
        (
            lambda: FaceMap.patches((1, 1), 0, [Patch(Rectangle(0, 0.6, 0, 1), 1), Patch(Rectangle(0.5, 1, 0, 1), 2)]),
            "overlap",
        ),
        (lambda: FaceMap.readings((1, 1), [0, 1], [0, 1], [[1, 2, 3], [4, 5, 6]]), "table of readings has shape"),
        (lambda: FaceMap.readings((1, 1), [0, 1], [0, 1], [[1, math.inf], [4, 5]]), "not finite"),
        (lambda: FaceMap.readings((1, 1), [1, 0], [0, 1], [[1, 2], [4, 5]]), "increasing order"),
    ],
    ids=["NaN", "empty patch", "outside", "overlap", "shape", "infinite reading", "axis falls"],
)
def test_map_that_no_face_can_have_is_refused(make, sentence: str) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(NotPhysical, match=sentence):
        make()
