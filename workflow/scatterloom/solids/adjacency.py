"""Which triangles of a surface meet at which edges."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from scatterloom.solids.mesh import Mesh


@dataclass(frozen=True, eq=False)
class Edges:
    """The edges of a surface, each walked once in either direction if it is closed.

    Attributes
    ----------
    ends : int64 (n_edge, 2)
        Corners of every edge, the lower number first.
    forth, back : int64 (n_edge,)
        How many triangles walk it upwards and downwards.
    of_side : int64 (n_triangle, 3)
        Edge of each side of every triangle.
    """

    ends: NDArray[np.int64]
    forth: NDArray[np.int64]
    back: NDArray[np.int64]
    of_side: NDArray[np.int64]

    @property
    def pairs(self) -> NDArray[np.int64]:
        """Triangles that share an edge, int64 (n_pair, 2); each with the first one there."""
        sides = self.of_side.ravel()
        order = np.argsort(sides, kind="stable")
        triangle = order // 3
        start = np.flatnonzero(np.diff(sides[order], prepend=-1))
        first = np.repeat(triangle[start], np.diff(start, append=len(order)))
        return np.stack([first, triangle], axis=1)[first != triangle]


def edges_of(triangles: NDArray[np.int32]) -> Edges:
    """Edges of triangles given by their corners, int32 (n_triangle, 3)."""
    walks = triangles[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2).astype(np.int64)
    ends, which = np.unique(np.sort(walks, axis=1), axis=0, return_inverse=True)
    which = which.ravel()
    upwards = walks[:, 0] < walks[:, 1]
    forth = np.bincount(which[upwards], minlength=len(ends))
    back = np.bincount(which[~upwards], minlength=len(ends))
    return Edges(ends, forth, back, which.reshape(-1, 3))


def parts(mesh: Mesh) -> NDArray[np.int32]:
    """Number of the connected part that each triangle belongs to, in order of appearance."""
    return _connected(edges_of(mesh.triangles).pairs, len(mesh.triangles))


def with_smooth_pieces(mesh: Mesh, edge_angle_deg: float) -> Mesh:
    """The same surface in pieces that meet where it bends by more than an angle.

    Parameters
    ----------
    mesh : Mesh
    edge_angle_deg : float
        Triangles whose normals differ by no more belong to one smooth piece.
    """
    pairs = edges_of(mesh.triangles).pairs
    vectors = mesh.area_vectors
    a, b = vectors[pairs[:, 0]], vectors[pairs[:, 1]]
    scale = np.linalg.norm(a, axis=1) * np.linalg.norm(b, axis=1)
    # Triangles without area have no direction and belong to any neighbour.
    level = np.sum(a * b, axis=1) >= math.cos(math.radians(edge_angle_deg)) * scale
    return Mesh(mesh.corners, mesh.triangles, _connected(pairs[level], len(mesh.triangles)))


def _connected(pairs: NDArray[np.int64], count: int) -> NDArray[np.int32]:
    ones = np.ones(len(pairs), dtype=np.int8)
    graph = coo_array((ones, (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    label = connected_components(graph, directed=False)[1]
    _, first, inverse = np.unique(label, return_index=True, return_inverse=True)
    rank = np.empty(len(first), dtype=np.int32)
    rank[np.argsort(first)] = np.arange(len(first))
    return rank[inverse.ravel()]
