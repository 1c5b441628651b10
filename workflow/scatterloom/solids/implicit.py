"""Closed surfaces where a function is zero: marching tetrahedra on a fine grid."""

from __future__ import annotations

from collections.abc import Callable
from itertools import permutations, product

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.balance import balanced
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]
Field = Callable[[Floats], Floats]

ACROSS = 72
"""Cells of the grid along the longest side of the body."""

_CHUNK = 200_000
# Off every plane of symmetry: no corner of the grid lies on the surface but by accident.
_OFF = np.array([0.137, 0.371, 0.613])


def implicit_mesh(value: Field, low: Floats, high: Floats, across: int = ACROSS) -> Mesh:
    """Surface around the region where a function is negative, one smooth piece.

    Every cell of a grid is split into six tetrahedra about its diagonal, which fit together
    across cells; within each the function is taken as linear, so the surface is closed whatever
    the function does. Corners are then moved onto the surface by Newton's method.

    Parameters
    ----------
    value : function of float64 (n, 3) -> float64 (n,)
        Near zero about a distance: its gradient does not vanish there.
    low, high : float64 (3,)
        Box that holds the region.
    across : int
        Cells along the longest side of the box.
    """
    cell = float((high - low).max()) / across
    count = np.ceil((high - low) / cell).astype(int) + 3
    origin = low - (0.5 + _OFF) * cell
    values = np.empty(count)
    flat = values.reshape(-1)
    for first in range(0, flat.size, _CHUNK):
        number = np.arange(first, min(first + _CHUNK, flat.size))
        flat[number] = value(origin + cell * np.stack(np.unravel_index(number, count), axis=1))
    ends, triangles = _march(values)
    ends_at = [origin + cell * np.stack(np.unravel_index(e, count), axis=1) for e in ends.T]
    a, b = (flat[e] for e in ends.T)
    corners = ends_at[0] + (a / (a - b))[:, None] * (ends_at[1] - ends_at[0])
    corners = onto(value, corners, 1e-5 * cell, 3)

    def between(i: NDArray[np.int64], j: NDArray[np.int64]) -> Floats:
        return onto(value, 0.5 * (corners[i] + corners[j]), 1e-5 * cell, 2)

    piece = np.zeros(len(triangles), dtype=np.int32)
    return Mesh(balanced(corners, triangles, between), triangles, piece)


def onto(value: Field, points: Floats, step: float, rounds: int) -> Floats:
    """Points moved to where the function is zero, along its gradient by differences."""
    for _ in range(rounds):
        here = value(points)
        slope = np.stack([value(points + step * e) - here for e in np.eye(3)], axis=1) / step
        square = np.sum(slope**2, axis=1)
        points = points - (here / np.maximum(square, 0.25))[:, None] * slope
    return points


def _march(values: Floats) -> tuple[NDArray[np.int64], NDArray[np.int32]]:
    """Edges of the grid that the surface crosses (n, 2), and its triangles by their numbers."""
    shape = values.shape
    inside = values < 0.0
    held = np.zeros([n - 1 for n in shape], dtype=np.int8)
    for i, j, k in product((0, 1), repeat=3):
        held += inside[i : shape[0] - 1 + i, j : shape[1] - 1 + j, k : shape[2] - 1 + k]
    cut = np.stack(np.nonzero((held > 0) & (held < 8)), axis=1)
    flat = inside.reshape(-1)
    edges: list[NDArray[np.int64]] = []  # (n, 3 corners of a triangle, 2 ends)
    for path in permutations(range(3)):
        place = [cut]
        for axis in path:
            place.append(place[-1] + np.eye(3, dtype=int)[axis])
        four = np.stack([np.ravel_multi_index(p.T, shape) for p in place], axis=1)
        # those inside first
        order = np.argsort(~flat[four], axis=1, kind="stable")
        four = np.take_along_axis(four, order, axis=1)
        number = flat[four].sum(axis=1)
        for many, pairs in _CASES.items():
            some = four[number == many]
            edges += [
                np.stack([some[:, list(pair)] for pair in triple], axis=1) for triple in pairs
            ]
    ends = np.concatenate(edges)
    # Outwards is from the ends inside to those outside.
    where = np.stack(np.unravel_index(ends, shape), axis=-1).astype(float)
    share = values.reshape(-1)[ends]
    share = share[..., :1] / (share[..., :1] - share[..., 1:])
    corner = where[:, :, 0] + share * (where[:, :, 1] - where[:, :, 0])
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    out = (where[:, :, 1] - where[:, :, 0]).sum(axis=1)
    ends[np.sum(normal * out, axis=1) < 0.0] = ends[np.sum(normal * out, axis=1) < 0.0][:, ::-1]
    unique, which = np.unique(np.sort(ends.reshape(-1, 2), axis=1), axis=0, return_inverse=True)
    return unique, which.reshape(-1, 3).astype(np.int32)


_CASES = {
    1: (((0, 1), (0, 2), (0, 3)),),
    2: (((0, 2), (0, 3), (1, 3)), ((0, 2), (1, 3), (1, 2))),
    3: (((0, 3), (1, 3), (2, 3)),),
}
"""Edges (inside, outside) of a tetrahedron at the corners of each triangle, by how many of its
corners are inside, which come first."""
