"""Trilinear finite elements on a stack of layers, by scikit-fem: a general method that shares nothing with the core.

Layers bonded to each other share the nodes of their border; at a contact the nodes are there twice and joined by what
it lets through, h (u - u')(v - v') over the border. The mesh is a tensor product whose axes follow layers, pads and
boxes, each stretch of them cut into so many cells, closer at its ends.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy import sparse
from scipy.sparse.linalg import cg
from skfem import Basis, BilinearForm, ElementHex1, FacetBasis, LinearForm, MeshHex

from service.core import FACES, Body, Face, FaceMap, Film, Held, Inflow, Rectangle
from service.core.conditions import map_of

FloatArray = NDArray[np.float64]

# How far a node may be from a place, in parts of the body.
ON_NODE = 1e-9

# Order of the quadrature: two linear functions of each coordinate multiplied, and one place to spare.
EXACT = 3


@dataclass(frozen=True)
class Mesh:
    """Coordinates along the axes; z one stretch for each group of layers without a contact inside."""

    x: FloatArray
    y: FloatArray
    groups: tuple[FloatArray, ...]


def axis_with(marks: list[float], cells: int) -> FloatArray:
    """Places along an axis: each stretch between marks in so many cells, closer at its ends."""
    spread = 0.5 - 0.5 * np.cos(np.linspace(0.0, math.pi, cells + 1))
    pieces = [low + (high - low) * spread[:-1] for low, high in pairwise(sorted(set(marks)))]
    return np.concatenate([*pieces, [max(marks)]])


def mesh_of(body: Body, read: Rectangle, cells: int) -> Mesh:
    """A mesh that follows all that changes in a stack, and a rectangle of its section."""
    marks: list[list[float]] = [[0.0, length] for length in body.size]
    marks[0] += [read.p_low, read.p_high]
    marks[1] += [read.q_low, read.q_high]
    marks[2] += body.interfaces
    for face in ("z_low", "z_high"):
        data = map_of(body.faces[face])
        if data is not None:
            marks[0] += list(data.first_knots)
            marks[1] += list(data.second_knots)
    for source in body.sources:
        for axis in range(3):
            marks[axis] += [source.low[axis], source.high[axis]]
    for axis in range(2):
        marks[axis] = [float(mark) for mark in marks[axis] if mark <= body.size[axis]]
    z = axis_with(marks[2], cells)
    contacts = [height for height, layer in zip(body.interfaces, body.layers[1:], strict=True) if has_contact(layer)]
    cuts = [0, *(int(np.argmin(np.abs(z - height))) for height in contacts), z.size - 1]
    groups = tuple(z[low : high + 1] for low, high in pairwise(cuts))
    return Mesh(axis_with(marks[0], cells), axis_with(marks[1], cells), groups)


def has_contact(layer: Any) -> bool:
    """Whether a layer stands on a contact that conducts finitely."""
    return bool(layer.contact_below < math.inf)


def data_at(data: FaceMap, first: FloatArray, second: FloatArray) -> FloatArray:
    """A face's data at places on it, not as a tensor product."""
    return (data.first.at(np.ravel(first)) * data.second.at(np.ravel(second))).sum(axis=1).reshape(np.shape(first))


class LayeredElements:
    """The solution on a mesh of so many cells a stretch. read: the rectangle over which means are asked."""

    def __init__(self, body: Body, read: Rectangle, cells: int) -> None:
        self.body, self.read, self.mesh = body, read, mesh_of(body, read, cells)
        self.blocks = [MeshHex.init_tensor(self.mesh.x, self.mesh.y, z) for z in self.mesh.groups]
        self.first = np.cumsum([0, *(block.p.shape[1] for block in self.blocks)])
        count = int(self.first[-1])
        matrix, load = self._inside()
        held = np.full(count, np.nan)
        for face in FACES:
            self._add_face(face, matrix, load, held)
        self._add_contacts(matrix)
        whole = sum(matrix[1:], start=matrix[0]).tocsr()
        self.values = _solve(whole, load, held)

    def at(self, places: FloatArray) -> FloatArray:
        """Values at places that are nodes of the mesh, shape (n, 3); on a contact from below."""
        nodes = np.concatenate([block.p for block in self.blocks], axis=1)
        found = []
        for place in places:
            distance = np.abs((nodes - place[:, None]) / np.array(self.body.size)[:, None]).max(axis=0)
            node = int(np.argmin(distance))
            assert distance[node] < ON_NODE, "the place is not a node of the mesh"
            found.append(self.values[node])
        return np.array(found)

    def mean(self, face: Face) -> float:
        """Mean over the rectangle of z_low or z_high."""
        group, end = (0, 0.0) if face == "z_low" else (len(self.blocks) - 1, float(self.mesh.groups[-1][-1]))
        block, read = self.blocks[group], self.read
        facets = block.facets_satisfying(
            lambda x: (
                (x[2] == end) & (x[0] > read.p_low) & (x[0] < read.p_high) & (x[1] > read.q_low) & (x[1] < read.q_high)
            ),
            boundaries_only=True,
        )
        weights = LinearForm(lambda v, w: v).assemble(FacetBasis(block, ElementHex1(), facets=facets, intorder=EXACT))
        values = self.values[self.first[group] : self.first[group + 1]]
        return float(weights @ values / weights.sum())

    def _inside(self) -> tuple[list[Any], FloatArray]:
        body, terms, loads = self.body, [], []
        for block in self.blocks:
            basis = Basis(block, ElementHex1(), intorder=EXACT)

            def conduction(u: Any, v: Any, w: Any) -> Any:
                return sum(body.conductivity_at(i, w.x[2]) * u.grad[i] * v.grad[i] for i in range(3))

            def generation(v: Any, w: Any) -> Any:
                total = np.zeros_like(w.x[0])
                for source in body.generating:
                    inside = np.ones_like(w.x[0], dtype=bool)
                    for i in range(3):
                        inside &= (w.x[i] > source.low[i]) & (w.x[i] < source.high[i])
                    total = total + source.density * inside
                return total * v

            terms.append(BilinearForm(conduction).assemble(basis))
            loads.append(LinearForm(generation).assemble(basis))
        return [sparse.block_diag(terms, format="csr")], np.concatenate(loads)

    def _add_face(self, face: Face, matrix: list[Any], load: FloatArray, held: FloatArray) -> None:
        condition, axis = self.body.faces[face], "xyz".index(face[0])
        data = map_of(condition)
        if data is None:
            return
        first, second = [other for other in range(3) if other != axis]
        end = self.body.size[axis] if face.endswith("high") else 0.0
        film = condition.coefficient if isinstance(condition, Film) else 0.0
        for group, block in enumerate(self.blocks):
            near = ON_NODE * self.body.size[axis]
            nodes = np.flatnonzero(np.abs(block.p[axis] - end) < near)
            if nodes.size == 0:
                continue
            if isinstance(condition, Held):
                held[self.first[group] + nodes] = data_at(data, block.p[first][nodes], block.p[second][nodes])
                continue
            facets = block.facets_satisfying(lambda x, near=near: np.abs(x[axis] - end) < near)
            basis = FacetBasis(block, ElementHex1(), facets=facets, intorder=EXACT)

            def coefficient(w: Any) -> Any:
                if isinstance(condition, Inflow):
                    return 1.0
                # On a side in proportion to the conductivity in plane.
                return film if axis == 2 else film * self.body.conductivity_at(0, w.x[2]) / self.body.conductivity[0]

            def driving(v: Any, w: Any) -> Any:
                return coefficient(w) * data_at(data, w.x[first], w.x[second]) * v

            load[self.first[group] : self.first[group + 1]] += LinearForm(driving).assemble(basis)
            if film:
                film_matrix = BilinearForm(lambda u, v, w: coefficient(w) * u * v).assemble(basis)
                matrix.append(self._placed(film_matrix, group, group))

    def _placed(self, block: Any, row: int, column: int) -> Any:
        count = int(self.first[-1])
        block = block.tocoo()
        return sparse.coo_matrix(
            (block.data, (block.row + self.first[row], block.col + self.first[column])), shape=(count, count)
        )

    def _add_contacts(self, matrix: list[Any]) -> None:
        contacts = [layer.contact_below for layer in self.body.layers[1:] if has_contact(layer)]
        for group, conductance in enumerate(contacts):
            below, above = self.blocks[group], self.blocks[group + 1]
            border = float(self.mesh.groups[group][-1])
            facets = below.facets_satisfying(lambda x, border=border: x[2] == border, boundaries_only=True)
            mass = BilinearForm(lambda u, v, w: u * v).assemble(
                FacetBasis(below, ElementHex1(), facets=facets, intorder=EXACT)
            )
            # The same node of the block above.
            nodes = np.flatnonzero(below.p[2] == border)
            others = np.flatnonzero(above.p[2] == border)
            there = {(x, y): node for node, x, y in zip(others, above.p[0][others], above.p[1][others], strict=True)}
            partner = [there[x, y] for x, y in zip(below.p[0][nodes], below.p[1][nodes], strict=True)]
            up = sparse.coo_matrix(
                (np.ones(nodes.size), (nodes, partner)), shape=(below.p.shape[1], above.p.shape[1])
            ).tocsr()
            matrix.append(self._placed(conductance * mass, group, group))
            matrix.append(self._placed(conductance * up.T @ mass @ up, group + 1, group + 1))
            matrix.append(self._placed(-conductance * mass @ up, group, group + 1))
            matrix.append(self._placed(-conductance * up.T @ mass, group + 1, group))


def _solve(matrix: Any, load: FloatArray, held: FloatArray) -> FloatArray:
    values, free = np.where(np.isnan(held), 0.0, held), np.isnan(held)
    right = (load - matrix @ values)[free]
    inner = matrix[free][:, free].tocsr()
    # One on the diagonal, so that layers of very different conductance weigh alike.
    scale = sparse.diags_array(1 / np.sqrt(inner.diagonal()))
    scaled = (scale @ inner @ scale).tocsr()
    preconditioner = pyamg.smoothed_aggregation_solver(scaled, strength=("symmetric", {"theta": 0.05}))
    solution, failed = cg(scaled, scale @ right, rtol=1e-11, M=preconditioner.aspreconditioner(), maxiter=600)
    assert failed == 0
    values[free] = scale @ solution
    return values
