"""Where points lie about a closed surface."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]


def is_inside(mesh: Mesh, point: Floats) -> bool:
    """Whether the surface winds around a point: the solid angle of all triangles.

    Van Oosterom & Strackee (1983), IEEE Trans. Biomed. Eng. 30, 125 (from memory).
    """
    a, b, c = (mesh.corners[mesh.triangles[:, i]] - point for i in range(3))
    la, lb, lc = (np.linalg.norm(v, axis=1) for v in (a, b, c))
    volume = np.sum(a * np.cross(b, c), axis=1)
    base = la * lb * lc + np.sum(a * b, axis=1) * lc + np.sum(b * c, axis=1) * la
    base += np.sum(c * a, axis=1) * lb
    return bool(np.arctan2(volume, base).sum() * 2.0 > 2.0 * math.pi)


def distance_to(mesh: Mesh, point: Floats) -> float:
    """Distance of a point from the nearest triangle."""
    a, b, c = (mesh.corners[mesh.triangles[:, i]] - point for i in range(3))
    normal = np.cross(b - a, c - a)
    square = np.maximum(np.sum(normal**2, axis=1), 1e-300)
    height = np.sum(a * normal, axis=1) / square
    foot = height[:, None] * normal
    over = np.ones(len(a), dtype=bool)
    nearest = np.full(len(a), np.inf)
    for p, q in ((a, b), (b, c), (c, a)):
        side = q - p
        over &= np.sum(np.cross(side, foot - p) * normal, axis=1) >= 0.0
        length = np.maximum(np.sum(side**2, axis=1), 1e-300)
        share = np.clip(-np.sum(p * side, axis=1) / length, 0.0, 1.0)
        nearest = np.minimum(nearest, np.sum((p + share[:, None] * side) ** 2, axis=1))
    flat = np.where(over, height**2 * square, np.inf)
    return math.sqrt(float(np.minimum(flat, nearest).min()))
