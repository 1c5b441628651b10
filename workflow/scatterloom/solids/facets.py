"""Surfaces of flat faces: polyhedra by their faces, and convex hulls."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull

from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

_ONE_PLANE = 1e-9
"""Triangles of a hull whose planes differ by less, over its size, are one face."""


def faceted_mesh(corners: Floats, faces: Sequence[Sequence[int]]) -> Mesh:
    """Surface of convex flat faces, each a piece of its own.

    Parameters
    ----------
    corners : float64 (n_corner, 3)
    faces : sequence of sequence of int
        Corners of every face, counterclockwise seen from outside.
    """
    fans = [(face[0], face[i], face[i + 1]) for face in faces for i in range(1, len(face) - 1)]
    piece = np.repeat(np.arange(len(faces)), [len(face) - 2 for face in faces])
    return Mesh(np.asarray(corners, float), np.array(fans, np.int32), piece.astype(np.int32))


def hull_faces(points: Floats) -> tuple[Floats, list[list[int]]]:
    """Corners of the convex hull of points, and its faces in ascending order of their corners.

    Parameters
    ----------
    points : float64 (n, 3)

    Returns
    -------
    corners : float64 (n_corner, 3)
    faces : list of list of int
        Counterclockwise seen from outside.

    Raises
    ------
    ValueError
        If all points lie in one plane.
    """
    size = np.ptp(points, axis=0).max()
    if len(points) < 4 or np.linalg.matrix_rank(points - points[0], tol=1e-9 * size) < 3:
        raise ValueError("all points of the hull lie in one plane")
    hull = ConvexHull(points)
    kept = np.sort(hull.vertices)
    corners = points[kept]
    planes: list[Floats] = []
    for plane in hull.equations:
        if not any(_same(plane, other, size) for other in planes):
            planes.append(plane)
    faces = []
    for plane in planes:
        on = np.flatnonzero(np.abs(corners @ plane[:3] + plane[3]) < 10.0 * _ONE_PLANE * size)
        faces.append(_in_turn(corners, on, plane[:3]))
    return corners, sorted(faces)


def hull_mesh(points: Floats) -> Mesh:
    """Convex hull of points (n, 3)."""
    return faceted_mesh(*hull_faces(points))


def _same(one: Floats, other: Floats, size: float) -> bool:
    apart = np.abs(one - other)
    return bool(apart[:3].max() < _ONE_PLANE and apart[3] < _ONE_PLANE * size)


def _in_turn(corners: Floats, on: NDArray[np.int64], normal: Floats) -> list[int]:
    """Corners of one face counterclockwise about its normal, from the lowest number on."""
    away = corners[on] - corners[on].mean(axis=0)
    across = np.cross(normal, away[0])
    order = np.argsort(np.arctan2(away @ across, away @ away[0] * np.linalg.norm(normal)))
    ring = [int(number) for number in on[order]]
    first = ring.index(min(ring))
    return ring[first:] + ring[:first]
