"""Corners moved off a curved surface so that its triangles hold the same volume as it does."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Between = Callable[[NDArray[np.int64], NDArray[np.int64]], Floats]


def balanced(corners: Floats, triangles: NDArray[np.int32], between: Between) -> Floats:
    """Corners along whose triangles the volume is that of the curved surface, place by place.

    Triangles with corners on a surface cut its bulges off. To second order in their size the
    error of one triangle is its area times the mean of the errors in the middles of its edges.
    Each corner rises by the mean of these around it, weighted by area: the sum over all
    triangles vanishes, and so does the mean over few of them. What is left in a cell falls
    faster than the square of the size.

    Parameters
    ----------
    corners : float64 (n_corner, 3)
        On the surface.
    triangles : int32 (n_triangle, 3)
    between : function of int64 (n,), int64 (n,) -> float64 (n, 3)
        Points of the surface above the middles of edges, given by the corners at their ends.

    Returns
    -------
    float64 (n_corner, 3)
    """
    a, b, c = (corners[triangles[:, i]] for i in range(3))
    vector = 0.5 * np.cross(b - a, c - a)
    area = np.linalg.norm(vector, axis=1)
    edges = np.sort(triangles[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1)
    key = edges[:, 0].astype(np.int64) * len(corners) + edges[:, 1]
    unique, which = np.unique(key, return_inverse=True)
    low, high = unique // len(corners), unique % len(corners)
    missed = between(low, high) - 0.5 * (corners[low] + corners[high])
    # area times the mean rise
    above = np.sum(missed[which.reshape(-1, 3)].sum(axis=1) * vector, axis=1) / 3.0
    normal, weight, rise = np.zeros_like(corners), np.zeros(len(corners)), np.zeros(len(corners))
    for i in range(3):
        np.add.at(normal, triangles[:, i], vector)
        np.add.at(weight, triangles[:, i], area)
        np.add.at(rise, triangles[:, i], above)
    length = np.linalg.norm(normal, axis=1)
    # A corner no triangle uses stays.
    used = (weight > 0.0) & (length > 0.0)
    out = corners.copy()
    out[used] += (rise[used] / weight[used] / length[used])[:, None] * normal[used]
    return out
