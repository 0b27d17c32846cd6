"""Trilinear finite elements on a block, by scikit-fem: a general method that shares nothing with the core.

Weak form, with q the inflow, h the film coefficient and U its ambient:

    int k grad u . grad v + int_film h u v = int g v + int_inflow q v + int_film h U v
"""

from __future__ import annotations

from collections.abc import Callable

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
    """Nodal values on a uniform mesh; the answer looks values up at places that are nodes, shape (n_places, 3)."""
    axes = [np.linspace(0.0, length, count + 1) for length, count in zip(case.size, cells, strict=True)]
    mesh = MeshHex.init_tensor(*axes)
    element = ElementHex1()
    basis = Basis(mesh, element)
    k = case.conductivity

    @BilinearForm
    def conduction(u, v, w):  # type: ignore[no-untyped-def]
        return sum(k[i] * u.grad[i] * v.grad[i] for i in range(3))

    @LinearForm
    def generation(v, w):  # type: ignore[no-untyped-def]
        total = 0.0
        for low, high, density in case.sources:
            inside = np.ones_like(w.x[0], dtype=bool)
            for i in range(3):
                inside &= (w.x[i] > low[i]) & (w.x[i] < high[i])
            total = total + density * inside
        return total * v

    matrix, load = conduction.assemble(basis), generation.assemble(basis)
    held: dict[int, list[float]] = {}
    for face in case.faces:
        wall = case.walls[face]
        axis, across = _axes(face)
        place = case.size[axis] if face.endswith("high") else 0.0
        if wall.kind == "D":
            nodes = np.flatnonzero(np.abs(mesh.p[axis] - place) < ON_FACE * case.size[axis])
            values = data_at(wall.data, mesh.p[across[0]][nodes], mesh.p[across[1]][nodes])
            for node, value in zip(nodes, values, strict=True):
                held.setdefault(int(node), []).append(float(value))
            continue
        facets = mesh.facets_satisfying(
            lambda x, a=axis, at=place: np.abs(x[a] - at) < ON_FACE * case.size[a]
        )
        on_face = FacetBasis(mesh, element, facets=facets)
        factor = 1.0 if wall.kind == "N" else wall.coefficient

        @LinearForm
        def driving(v, w, data=wall.data, factor=factor, across=across):  # type: ignore[no-untyped-def]
            return factor * data_at(data, w.x[across[0]], w.x[across[1]]) * v

        load = load + driving.assemble(on_face)
        if wall.kind == "R":
            film = BilinearForm(lambda u, v, w, h=factor: h * u * v)
            matrix = matrix + film.assemble(on_face)
    solution = np.zeros(mesh.p.shape[1])
    nodes = np.array(sorted(held), dtype=int)
    # Where faces with different held values meet, the node takes the mean of both.
    solution[nodes] = [float(np.mean(held[int(node)])) for node in nodes]
    if nodes.size:
        inner_matrix, inner_load, solution, inner = condense(matrix, load, x=solution, D=nodes)
    else:
        inner_matrix, inner_load, inner = matrix, load, np.arange(solution.size)
    solution[inner] = _solve(inner_matrix.tocsr(), inner_load)

    def look_up(places: FloatArray) -> FloatArray:
        found = []
        for place in places:
            distance = np.abs((mesh.p - place[:, None]) / np.array(case.size)[:, None]).max(axis=0)
            node = int(np.argmin(distance))
            assert distance[node] < ON_FACE, "the place is not a node of the mesh"
            found.append(solution[node])
        return np.array(found)

    return look_up


def _axes(face: Face) -> tuple[int, list[int]]:
    axis = "xyz".index(face[0])
    return axis, [other for other in range(3) if other != axis]


def _solve(matrix, load: FloatArray) -> FloatArray:  # type: ignore[no-untyped-def]
    preconditioner = pyamg.smoothed_aggregation_solver(matrix).aspreconditioner()
    solution, failed = cg(matrix, load, rtol=1e-11, M=preconditioner, maxiter=400)
    assert failed == 0
    return np.asarray(solution)
