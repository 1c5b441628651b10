"""Triangles of the sphere and of what is seen whole from its centre."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.balance import balanced
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

FINE = 64
"""Parts of an edge of the icosahedron: 81920 triangles, half a cell long at 64 cells across.

Cells of a ball are right to 1e-4 of a cell then (measured)."""


@lru_cache(maxsize=8)
def directions(parts: int) -> tuple[Floats, NDArray[np.int32]]:
    """Triangles of the unit sphere: an icosahedron whose faces are divided and puffed up.

    The planes x = 0, y = 0, z = 0 are mirror planes.

    Parameters
    ----------
    parts : int
        Parts of an edge; there are 20 parts**2 triangles.

    Returns
    -------
    corners : float64 (n, 3)
        Unit vectors.
    triangles : int32 (20 parts**2, 3)
        Counterclockwise seen from outside.
    """
    golden = 0.5 * (1.0 + np.sqrt(5.0))
    plane = [(0.0, s, t * golden) for s in (-1.0, 1.0) for t in (-1.0, 1.0)]
    first = np.array([np.roll(point, k) for k in range(3) for point in plane])
    apart = np.linalg.norm(first[:, None] - first, axis=2)
    near = np.abs(apart - 2.0) < 1e-9
    faces = [
        (i, j, k)
        for i in range(12) for j in range(i) for k in range(j)
        if near[i, j] and near[j, k] and near[i, k]
    ]  # fmt: skip
    numbers: dict[tuple[tuple[int, int], ...], int] = {}
    points: list[Floats] = []
    triangles: list[tuple[int, int, int]] = []

    def number(face: tuple[int, int, int], weights: tuple[int, int, int]) -> int:
        # A point belongs to the corners with a share: the same on both sides of an edge.
        key = tuple(sorted((c, w) for c, w in zip(face, weights, strict=True) if w))
        if key not in numbers:
            numbers[key] = len(points)
            points.append(sum(w * first[c] for c, w in key))
        return numbers[key]

    for i, j, k in faces:
        outward = np.dot(np.cross(first[j] - first[i], first[k] - first[i]), first[i]) > 0.0
        face = (i, j, k) if outward else (i, k, j)
        at = {
            (p, q): number(face, (parts - p - q, p, q))
            for p in range(parts + 1) for q in range(parts + 1 - p)
        }  # fmt: skip
        for p in range(parts):
            for q in range(parts - p):
                triangles.append((at[p, q], at[p + 1, q], at[p, q + 1]))
                if p + q < parts - 1:
                    triangles.append((at[p + 1, q], at[p + 1, q + 1], at[p, q + 1]))
    corners = np.array(points)
    corners /= np.linalg.norm(corners, axis=1, keepdims=True)
    return corners, np.array(triangles, dtype=np.int32)


def star_mesh(radius: Callable[[Floats], Floats], parts: int = FINE) -> Mesh:
    """Smooth surface with one radius in every direction.

    Parameters
    ----------
    radius : function of float64 (n, 3) -> float64 (n,)
        Distance of the surface from the origin along unit vectors.
    parts : int
        See `directions`.
    """
    unit, triangles = directions(parts)
    corners = unit * radius(unit)[:, None]

    def between(i: NDArray[np.int64], j: NDArray[np.int64]) -> Floats:
        # Along the middle of the chord, so that the surface is met right above it.
        middle = corners[i] + corners[j]
        middle /= np.linalg.norm(middle, axis=1, keepdims=True)
        return middle * radius(middle)[:, None]

    piece = np.zeros(len(triangles), dtype=np.int32)
    return Mesh(balanced(corners, triangles, between), triangles, piece)


def sphere_mesh(centre: Floats, radius: float, parts: int = FINE) -> Mesh:
    """A sphere."""
    ball = star_mesh(lambda unit: np.ones(len(unit)), parts)
    return ball.moved(np.asarray(centre, dtype=float) / radius, radius)
