"""Trilinear finite elements on a block, by scikit-fem: a general method that shares nothing with the core.

Weak form, with q the inflow, h the film coefficient and U its ambient:

    int k grad u . grad v + int_film h u v = int g v + int_inflow q v + int_film h U v
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy.interpolate import RegularGridInterpolator
from scipy.sparse.linalg import cg
from skfem import Basis, BilinearForm, ElementHex1, FacetBasis, LinearForm, MeshHex, condense

from service.core import Face
from tests.core.reference.cases import Case, Cells, Data

FloatArray = NDArray[np.float64]
ON_FACE = 1e-9


def data_at(data: Data, first: FloatArray, second: FloatArray) -> FloatArray:
    """A face's data at places on it."""
    if isinstance(data, Cells):
        values = np.full(np.shape(first), data.background)
        for p_low, p_high, q_low, q_high, value in data.patches:
            inside = (first >= p_low) & (first <= p_high) & (second >= q_low) & (second <= q_high)
            values = np.where(inside, value, values)
        return values
    if isinstance(data, (int, float)):
        return np.full(np.shape(first), float(data))
    table = RegularGridInterpolator(
        (data.first, data.second), np.array(data.table), bounds_error=False, fill_value=None
    )
    return np.asarray(table(np.stack([first, second], axis=-1)))


def solve_by_finite_elements(case: Case, cells: tuple[int, int, int]) -> Callable[[FloatArray], FloatArray]:
    """Solve on a uniform mesh; the answer looks up values at places that are nodes, shape (n_places, 3)."""
    axes = [np.linspace(0.0, length, count + 1) for length, count in zip(case.size, cells, strict=True)]
    mesh = MeshHex.init_tensor(*axes)
    matrix, load = _conduction_and_generation(case, mesh)
    held: dict[int, list[float]] = {}
    for face in case.faces:
        if case.walls[face].kind == "D":
            for node, value in _held_nodes(case, face, mesh).items():
                held.setdefault(node, []).append(value)
        else:
            film, driving = _film_and_driving(case, face, mesh)
            matrix, load = matrix + film, load + driving
    solution = np.zeros(mesh.p.shape[1])
    nodes = np.array(sorted(held), dtype=int)
    # Where faces with different held values meet, the node takes the mean of both.
    solution[nodes] = [float(np.mean(held[int(node)])) for node in nodes]
    inner = np.arange(solution.size)
    if nodes.size:
        matrix, load, solution, inner = condense(matrix, load, x=solution, D=nodes)
    solution[inner] = _solve(matrix.tocsr(), load)

    def look_up(places: FloatArray) -> FloatArray:
        found = []
        for place in places:
            distance = np.abs((mesh.p - place[:, None]) / np.array(case.size)[:, None]).max(axis=0)
            node = int(np.argmin(distance))
            assert distance[node] < ON_FACE, "the place is not a node of the mesh"
            found.append(solution[node])
        return np.array(found)

    return look_up


def _conduction_and_generation(case: Case, mesh: MeshHex) -> tuple[Any, FloatArray]:
    k = case.conductivity

    def conduction(u: Any, v: Any, w: Any) -> Any:
        return sum(k[i] * u.grad[i] * v.grad[i] for i in range(3))

    def generation(v: Any, w: Any) -> Any:
        total = np.zeros_like(w.x[0])
        for low, high, density in case.sources:
            inside = np.ones_like(w.x[0], dtype=bool)
            for i in range(3):
                inside &= (w.x[i] > low[i]) & (w.x[i] < high[i])
            total = total + density * inside
        return total * v

    basis = Basis(mesh, ElementHex1())
    return BilinearForm(conduction).assemble(basis), LinearForm(generation).assemble(basis)


def _held_nodes(case: Case, face: Face, mesh: MeshHex) -> dict[int, float]:
    axis, across = _axes(face)
    nodes = np.flatnonzero(np.abs(mesh.p[axis] - _position(case, face)) < ON_FACE * case.size[axis])
    values = data_at(case.walls[face].data, mesh.p[across[0]][nodes], mesh.p[across[1]][nodes])
    return {int(node): float(value) for node, value in zip(nodes, values, strict=True)}


def _film_and_driving(case: Case, face: Face, mesh: MeshHex) -> tuple[Any, FloatArray]:
    """Matrix h u v and load h U v of a film face, or nothing and q v of one with a given inflow."""
    wall = case.walls[face]
    axis, across = _axes(face)
    facets = mesh.facets_satisfying(lambda x: np.abs(x[axis] - _position(case, face)) < ON_FACE * case.size[axis])
    basis = FacetBasis(mesh, ElementHex1(), facets=facets)
    film = wall.coefficient if wall.kind == "R" else 0.0
    strength = wall.coefficient if wall.kind == "R" else 1.0

    def driving(v: Any, w: Any) -> Any:
        return strength * data_at(wall.data, w.x[across[0]], w.x[across[1]]) * v

    matrix = BilinearForm(lambda u, v, w: film * u * v).assemble(basis)
    return matrix, LinearForm(driving).assemble(basis)


def _axes(face: Face) -> tuple[int, list[int]]:
    axis = "xyz".index(face[0])
    return axis, [other for other in range(3) if other != axis]


def _position(case: Case, face: Face) -> float:
    return case.size[_axes(face)[0]] if face.endswith("high") else 0.0


def _solve(matrix: Any, load: FloatArray) -> FloatArray:
    preconditioner = pyamg.smoothed_aggregation_solver(matrix).aspreconditioner()
    solution, failed = cg(matrix, load, rtol=1e-11, M=preconditioner, maxiter=400)
    assert failed == 0
    return np.asarray(solution)
