"""Trilinear finite elements on a block with pads on its top, on a mesh graded towards their edges, by scikit-fem.

The flow of a held pad is the sum of what its nodes need to stay at their value, which errs by the square of the error
of the field. On meshes of a graded family it falls as the square of the number of elements along an axis, so that two
of them give a limit.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import pyamg
from numpy.typing import NDArray
from scipy.sparse.linalg import cg
from skfem import Basis, BilinearForm, ElementHex1, FacetBasis, LinearForm, MeshHex, condense

FloatArray = NDArray[np.float64]
ON_FACE = 1e-9


@dataclass(frozen=True)
class Block:
    """A block with insulated sides. films: (z, p_low, p_high, q_low, q_high, coefficient, ambient) on bottom or top.

    held: (p_low, p_high, q_low, q_high, value) on the top.
    """

    size: tuple[float, float, float]
    conductivity: tuple[float, float, float]
    films: tuple[tuple[float, float, float, float, float, float, float], ...]
    held: tuple[tuple[float, float, float, float, float], ...]


def axis_with_edges(edges: list[float], count: int) -> FloatArray:
    """Nodes that narrow towards every inner edge as the square of their number, `count` elements between two."""
    share = np.linspace(0.0, 1.0, count + 1)
    both = np.where(share < 0.5, 2 * share**2, 1 - 2 * (1 - share) ** 2)
    pieces = []
    for index, (low, high) in enumerate(pairwise(edges)):
        graded = both
        if index == 0:
            graded = 1 - (1 - share) ** 2
        elif index == len(edges) - 2:
            graded = share**2
        pieces.append(low + (high - low) * graded[:-1])
    return np.append(np.concatenate(pieces), edges[-1])


def pad_flows(block: Block, axes: tuple[FloatArray, FloatArray, FloatArray]) -> FloatArray:
    """Flow into the body through each held pad, then through each film."""
    mesh = MeshHex.init_tensor(*axes)
    k = block.conductivity

    def conduction(u: Any, v: Any, _: Any) -> Any:
        return sum(k[i] * u.grad[i] * v.grad[i] for i in range(3))

    matrix = BilinearForm(conduction).assemble(Basis(mesh, ElementHex1()))
    load = np.zeros(mesh.p.shape[1])
    weights = []
    for z, p_low, p_high, q_low, q_high, coefficient, ambient in block.films:
        facets = mesh.facets_satisfying(
            lambda x, z=z, p=(p_low, p_high), q=(q_low, q_high): (
                (np.abs(x[2] - z) < ON_FACE) & (x[0] > p[0]) & (x[0] < p[1]) & (x[1] > q[0]) & (x[1] < q[1])
            )
        )
        basis = FacetBasis(mesh, ElementHex1(), facets=facets)
        matrix = matrix + BilinearForm(lambda u, v, _, h=coefficient: h * u * v).assemble(basis)
        area = LinearForm(lambda v, _: 1.0 * v).assemble(basis)
        load += coefficient * ambient * area
        weights.append((coefficient, ambient, area))
    solution, nodes = np.zeros(load.size), []
    for p_low, p_high, q_low, q_high, value in block.held:
        x, y, z = mesh.p
        on_pad = (np.abs(z - block.size[2]) < ON_FACE) & (x > p_low - ON_FACE) & (x < p_high + ON_FACE)
        nodes.append(np.flatnonzero(on_pad & (y > q_low - ON_FACE) & (y < q_high + ON_FACE)))
        solution[nodes[-1]] = value
    inner = np.arange(load.size)
    reduced, right = matrix, load
    if nodes:
        reduced, right, solution, inner = condense(matrix, load, x=solution, D=np.concatenate(nodes))
    preconditioner = pyamg.smoothed_aggregation_solver(reduced.tocsr()).aspreconditioner()
    solution[inner], failed = cg(reduced.tocsr(), right, rtol=1e-10, M=preconditioner, maxiter=600)
    assert failed == 0
    reaction = matrix @ solution - load
    flows = [float(reaction[pad].sum()) for pad in nodes]
    flows += [float(coefficient * (ambient * area.sum() - area @ solution)) for coefficient, ambient, area in weights]
    return np.array(flows)


def limit_of_flows(block: Block, edges: tuple[list[float], list[float]], depth: FloatArray, count: int) -> FloatArray:
    """The flows on a mesh and on one twice as fine, extrapolated; depth: shares of the height, even in number."""
    found = []
    for finer in (1, 2):
        share = depth if finer == 1 else np.sort(np.concatenate([depth, 0.5 * (depth[1:] + depth[:-1])]))
        axes = [axis_with_edges(along, finer * count) for along in edges]
        found.append(pad_flows(block, (axes[0], axes[1], block.size[2] * share)))
    return np.asarray((4 * found[1] - found[0]) / 3)
