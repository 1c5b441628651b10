"""Whether a surface of triangles crosses itself."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.solids.mesh import Mesh


@njit(cache=True)
def _volume(a, b, c, d):  # type: ignore[no-untyped-def]
    """Six times the signed volume of a tetrahedron."""
    ux, uy, uz = a[0] - d[0], a[1] - d[1], a[2] - d[2]
    vx, vy, vz = b[0] - d[0], b[1] - d[1], b[2] - d[2]
    wx, wy, wz = c[0] - d[0], c[1] - d[1], c[2] - d[2]
    return ux * (vy * wz - vz * wy) + uy * (vz * wx - vx * wz) + uz * (vx * wy - vy * wx)


@njit(cache=True)
def _pierces(p, q, a, b, c, tiny):  # type: ignore[no-untyped-def]
    """Whether the segment pq passes through the inside of the triangle abc."""
    above, below = _volume(a, b, c, p), _volume(a, b, c, q)
    if not ((above > tiny and below < -tiny) or (above < -tiny and below > tiny)):
        return False
    u, v, w = _volume(p, q, a, b), _volume(p, q, b, c), _volume(p, q, c, a)
    return (u > tiny and v > tiny and w > tiny) or (u < -tiny and v < -tiny and w < -tiny)


@njit(cache=True)
def _cross(corners, one, other, tiny):  # type: ignore[no-untyped-def]
    """Whether a side of either triangle passes through the other one."""
    for first, second in ((one, other), (other, one)):
        a, b, c = corners[second[0]], corners[second[1]], corners[second[2]]
        for i in range(3):
            p, q = first[i], first[(i + 1) % 3]
            touching = False
            for k in second:
                touching = touching or k in (p, q)
            if not touching and _pierces(corners[p], corners[q], a, b, c, tiny):
                return True
    return False


@njit(cache=True)
def _first_crossing(corners, triangles, low, high, shape, start, listed, tiny):  # type: ignore[no-untyped-def]
    """The first pair of triangles that cross among those in the same box of a grid."""
    for i in range(shape[0]):
        for j in range(shape[1]):
            for k in range(shape[2]):
                cell = (i * shape[1] + j) * shape[2] + k
                for m in range(start[cell], start[cell + 1]):
                    one = listed[m]
                    for n in range(start[cell], m):
                        other = listed[n]
                        # A pair that shares several boxes is tried in the lowest of them.
                        if (
                            max(low[one, 0], low[other, 0]) == i
                            and max(low[one, 1], low[other, 1]) == j
                            and max(low[one, 2], low[other, 2]) == k
                            and _cross(corners, triangles[one], triangles[other], tiny)
                        ):
                            return other, one
    return -1, -1


@njit(cache=True)
def _listed(low, high, shape):  # type: ignore[no-untyped-def]
    """Triangles in every box of the grid: start of each box's list, and the list."""
    start = np.zeros(shape[0] * shape[1] * shape[2] + 1, dtype=np.int64)
    listed = np.empty(0, dtype=np.int64)
    for filling in (False, True):
        place = start.copy()
        for t in range(len(low)):
            for i in range(low[t, 0], high[t, 0] + 1):
                for j in range(low[t, 1], high[t, 1] + 1):
                    for k in range(low[t, 2], high[t, 2] + 1):
                        cell = (i * shape[1] + j) * shape[2] + k
                        if filling:
                            listed[place[cell]] = t
                            place[cell] += 1
                        else:
                            start[cell + 1] += 1
        if not filling:
            start = np.cumsum(start)
            listed = np.empty(start[-1], dtype=np.int64)
    return start, listed


def first_crossing(mesh: Mesh) -> tuple[int, int] | None:
    """Two triangles of which a side of one passes through the inside of the other, if any.

    Pairs are sought box by box on a grid with about one box a triangle. Surfaces that merely touch,
    or overlap in one plane, do not cross; nothing nearer than 1e-12 of the whole extent
    is told apart.
    """
    corner = mesh.corners[mesh.triangles]
    floor, ceiling = corner.min(axis=1), corner.max(axis=1)
    extent = ceiling.max(axis=0) - floor.min(axis=0)
    edge = max(float(extent.max()) / 128.0, 2.0 * float(np.mean(ceiling - floor)))
    shape = np.maximum(1, np.ceil(extent / edge)).astype(np.int64)

    def box(place: NDArray[np.float64]) -> NDArray[np.int64]:
        return np.clip(((place - floor.min(axis=0)) / edge).astype(np.int64), 0, shape - 1)

    low, high = box(floor), box(ceiling)
    start, listed = _listed(low, high, shape)
    tiny = 1e-12 * float(extent.max()) ** 3
    one, other = _first_crossing(
        mesh.corners, mesh.triangles, low, high, shape, start, listed, tiny
    )
    return None if one < 0 else (int(one), int(other))
