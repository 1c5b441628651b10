"""The parallel surface within a convex body."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull, HalfspaceIntersection

from scatterloom.solids.facets import faceted_mesh, hull_faces
from scatterloom.solids.mesh import Mesh
from scatterloom.solids.rounding import inscribed_ball

Floats = NDArray[np.float64]

_FEW = 200
"""Bodies of at most this many pieces and triangles are polyhedra, shrunk plane by plane."""


def shrunk(mesh: Mesh, depth: float) -> Mesh:
    """What is farther from the surface of a convex body than this.

    A polyhedron becomes a polyhedron. Of another body every corner goes inwards along the normal
    of its own piece, so that edges between pieces stay edges.

    Raises
    ------
    ValueError
        If the body is not convex, holds no such point, or bends more tightly than this depth.
    """
    hull = ConvexHull(mesh.corners[np.unique(mesh.triangles)])
    if mesh.volume < hull.volume * (1.0 - 1e-4):
        raise ValueError("only a convex body can have layers of constant thickness")
    if len(mesh.triangles) <= _FEW:
        unit = mesh.area_vectors / np.linalg.norm(mesh.area_vectors, axis=1, keepdims=True)
        first = mesh.corners[mesh.triangles[:, 0]]
        keep = np.unique(mesh.piece, return_index=True)[1]
        normals, distances = unit[keep], np.sum(unit * first, axis=1)[keep]
        middle, largest = inscribed_ball(normals, distances)
        if largest <= depth * 1.001:
            raise ValueError(_too_thin(depth, largest))
        planes = np.column_stack([normals, depth - distances])
        points = HalfspaceIntersection(planes, middle).intersections
        size = np.ptp(points, axis=0).max()
        points = points[np.unique(np.round(points / size, 9), axis=0, return_index=True)[1]]
        return faceted_mesh(*hull_faces(points))
    out = mesh.corners - depth * _shifts(mesh)
    inner = Mesh(out, mesh.triangles, mesh.piece)
    before, after = mesh.area_vectors, inner.area_vectors
    if np.sum(before * after, axis=1).min() <= 0.0:
        raise ValueError(_too_thin(depth, None))
    return inner


def _too_thin(depth: float, room: float | None) -> str:
    found = "" if room is None else f": the largest sphere inside has the radius {room:.4g}"
    return f"layers of {depth:.4g} equal-volume radii together do not fit into the body{found}"


def _shifts(mesh: Mesh) -> Floats:
    """For every corner the vector whose product with the normal of each piece there is 1."""
    count = int(mesh.piece.max()) + 1
    key = mesh.piece[:, None].astype(np.int64) + count * mesh.triangles.astype(np.int64)
    unique, which = np.unique(key, return_inverse=True)
    normal = np.zeros((len(unique), 3))
    np.add.at(normal, which.ravel(), np.repeat(mesh.area_vectors, 3, axis=0))
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    corner = unique // count
    # least squares over the pieces of each corner: N s = 1
    square = np.zeros((len(mesh.corners), 3, 3))
    right = np.zeros((len(mesh.corners), 3))
    np.add.at(square, corner, normal[:, :, None] * normal[:, None, :])
    np.add.at(right, corner, normal)
    return np.einsum("nij,nj->ni", np.linalg.pinv(square, rcond=1e-6, hermitian=True), right)
