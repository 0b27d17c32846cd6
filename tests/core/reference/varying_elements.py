"""Trilinear finite elements for a conductivity that varies with the potential and faces that radiate, by scikit-fem.

The potential itself is solved for, not theta. Steps take f from the step before, and the slope of the films, until

    int k f(u) grad u . grad v = int g v + int_inflow q v + int_film (h (U - u) + s ((U + z)^4 - (u + z)^4)) v

holds.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy.sparse.linalg import cg
from skfem import Basis, BilinearForm, ElementHex1, FacetBasis, LinearForm, MeshHex

from service.core import Face

FloatArray = NDArray[np.float64]
OnFace = Callable[[FloatArray, FloatArray, FloatArray], FloatArray]


@dataclass(frozen=True)
class FilmData:
    """h, U as a function of the place, and s, z of the radiation."""

    coefficient: float
    ambient: OnFace
    radiation: float = 0.0
    zero: float = 0.0


@dataclass(frozen=True)
class VaryingCase:
    """A box with f; faces that are not named are insulated."""

    size: tuple[float, float, float]
    conductivity: tuple[float, float, float]
    factor: Callable[[FloatArray], FloatArray]
    held: dict[Face, float] = field(default_factory=dict)
    inflow: dict[Face, OnFace] = field(default_factory=dict)
    films: dict[Face, FilmData] = field(default_factory=dict)
    generation: float = 0.0


def solve_varying(case: VaryingCase, cells: int, start: float) -> Callable[[FloatArray], FloatArray]:
    """Solve on a mesh of so many cells along each axis; the answer looks up values at nodes, shape (n_places, 3)."""
    mesh = MeshHex.init_tensor(*(np.linspace(0.0, length, cells + 1) for length in case.size))
    basis = Basis(mesh, ElementHex1())
    u = np.full(mesh.p.shape[1], start)
    fixed = np.zeros(0, dtype=int)
    for face, value in case.held.items():
        nodes = np.flatnonzero(_on(case, face, mesh.p))
        u[nodes] = value
        fixed = np.union1d(fixed, nodes)
    for _ in range(60):
        matrix, residual = _inside(case, basis, u)
        for face in (*case.inflow, *case.films):
            more, rest = _on_face(case, face, mesh, u)
            matrix, residual = matrix + more, residual + rest
        change = _step(matrix, residual, fixed)
        u = u + change
        if np.abs(change).max() < 1e-7 * np.abs(u).max():
            break
    else:
        raise AssertionError("the iteration did not converge")

    def look_up(places: FloatArray) -> FloatArray:
        distance = np.abs(mesh.p[:, None, :] - places.T[:, :, None]).max(axis=0)
        assert distance.min(axis=1).max() < 1e-9, "a place is not a node of the mesh"
        return np.asarray(u[distance.argmin(axis=1)])

    return look_up


def _step(matrix: Any, residual: FloatArray, fixed: NDArray[np.intp]) -> FloatArray:
    change = np.zeros_like(residual)
    free = np.setdiff1d(np.arange(residual.size), fixed)
    inner = matrix.tocsr()[free][:, free]
    hierarchy: Any = pyamg.smoothed_aggregation_solver(inner)
    preconditioner = hierarchy.aspreconditioner()
    change[free], failed = cg(inner, residual[free], rtol=1e-6, M=preconditioner, maxiter=400)
    assert failed == 0
    return change


def _on(case: VaryingCase, face: Face, x: FloatArray) -> NDArray[np.bool_]:
    axis = "xyz".index(face[0])
    end = case.size[axis] if face.endswith("high") else 0.0
    return np.asarray(np.abs(x[axis] - end) < 1e-9 * case.size[axis])


def _inside(case: VaryingCase, basis: Any, u: FloatArray) -> tuple[Any, FloatArray]:
    k = case.conductivity

    def conduction(du: Any, v: Any, w: Any) -> Any:
        return sum(k[i] * case.factor(w.u) * du.grad[i] * v.grad[i] for i in range(3))

    def residual(v: Any, w: Any) -> Any:
        flux = sum(k[i] * case.factor(w.u) * w.u.grad[i] * v.grad[i] for i in range(3))
        return case.generation * v - flux

    field_u = basis.interpolate(u)
    return BilinearForm(conduction).assemble(basis, u=field_u), LinearForm(residual).assemble(basis, u=field_u)


def _nothing(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return 0.0 * x


def _on_face(case: VaryingCase, face: Face, mesh: MeshHex, u: FloatArray) -> tuple[Any, FloatArray]:
    facets = mesh.facets_satisfying(lambda x: _on(case, face, x))
    basis = FacetBasis(mesh, ElementHex1(), facets=facets, intorder=4)
    field_u = basis.interpolate(u)
    film = case.films.get(face, FilmData(0.0, _nothing))
    inflow = case.inflow.get(face, _nothing)

    def given_off(value: Any) -> Any:
        return film.coefficient * value + film.radiation * (value + film.zero) ** 4

    def slope(du: Any, v: Any, w: Any) -> Any:
        return (film.coefficient + 4 * film.radiation * (w.u + film.zero) ** 3) * du * v

    def residual(v: Any, w: Any) -> Any:
        x, y, z = w.x
        return (inflow(x, y, z) + given_off(film.ambient(x, y, z)) - given_off(w.u)) * v

    return BilinearForm(slope).assemble(basis, u=field_u), LinearForm(residual).assemble(basis, u=field_u)
