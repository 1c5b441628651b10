"""Exact overlap of a convex polyhedron with the cells of a cubic lattice, by plane clipping.

Everything is measured in cells. In a cell that the surface crosses, the parts of the
polyhedron's faces inside the cell and the parts of the cell's faces inside the polyhedron
are clipped as polygons; they close a body whose volume the divergence theorem gives.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.particle.polyhedron import Polyhedron

Floats = NDArray[np.float64]

_ON_PLANE = 1e-11
"""A face this near [cells] to a face of the cell counts as lying on it: it cuts no cell, and
its area belongs to the cell on its inner side."""


@njit(cache=True)
def _clip(polygon, count, normal, distance, spare):  # type: ignore[no-untyped-def]
    """Keep the part of a polygon with normal . x <= distance; return its number of corners.

    Works in `polygon` (n, 3), with `spare` of the same shape as a buffer.
    """
    kept = 0
    for i in range(count):
        j = i + 1 if i + 1 < count else 0
        here, there = -distance, -distance
        for c in range(3):
            here += normal[c] * polygon[i, c]
            there += normal[c] * polygon[j, c]
        if here <= 0.0:
            for c in range(3):
                spare[kept, c] = polygon[i, c]
            kept += 1
        if (here < 0.0 < there) or (there < 0.0 < here):
            share = here / (here - there)
            for c in range(3):
                spare[kept, c] = polygon[i, c] + share * (polygon[j, c] - polygon[i, c])
            kept += 1
    for i in range(kept):
        for c in range(3):
            polygon[i, c] = spare[i, c]
    return kept


@njit(cache=True)
def _area(polygon, count, normal):  # type: ignore[no-untyped-def]
    """Area of a polygon with this unit normal."""
    total = 0.0
    for i in range(1, count - 1):
        ax, ay, az = (
            polygon[i, 0] - polygon[0, 0],
            polygon[i, 1] - polygon[0, 1],
            polygon[i, 2] - polygon[0, 2],
        )
        bx, by, bz = (
            polygon[i + 1, 0] - polygon[0, 0],
            polygon[i + 1, 1] - polygon[0, 1],
            polygon[i + 1, 2] - polygon[0, 2],
        )
        total += normal[0] * (ay * bz - az * by)
        total += normal[1] * (az * bx - ax * bz)
        total += normal[2] * (ax * by - ay * bx)
    return 0.5 * total


@njit(cache=True)
def _square(polygon, count, axis, area):  # type: ignore[no-untyped-def]
    """Integral of the squared coordinate over a polygon of this area.

    By triangles from the first corner, whose share of the area follows from the whole.
    """
    total, weight = 0.0, 0.0
    a = polygon[0, axis]
    for i in range(1, count - 1):
        part = 0.0
        for p in range(3):
            q, r = (p + 1) % 3, (p + 2) % 3
            part += (
                (polygon[i, q] - polygon[0, q]) * (polygon[i + 1, r] - polygon[0, r])
                - (polygon[i, r] - polygon[0, r]) * (polygon[i + 1, q] - polygon[0, q])
            ) ** 2
        part = np.sqrt(part)
        b, c = polygon[i, axis], polygon[i + 1, axis]
        total += part * (a * a + b * b + c * c + a * b + b * c + c * a) / 6.0
        weight += part
    return total * area / weight if weight > 0.0 else 0.0


@njit(cache=True)
def _within(ring, count, centre, side, polygon, spare):  # type: ignore[no-untyped-def]
    """Part of a face within a cell, seen from its centre, in `polygon`; number of corners."""
    for corner in range(count):
        for c in range(3):
            polygon[corner, c] = ring[corner, c] - centre[c]
    for axis in range(3):
        for sign in (-1.0, 1.0):
            side[:] = 0.0
            side[axis] = sign
            count = _clip(polygon, count, side, 0.5 + _ON_PLANE, spare)
    return count


@njit(cache=True)
def _cells(normals, distances, rings, sizes, origin, box):  # type: ignore[no-untyped-def]
    n_face = normals.shape[0]
    fill = np.zeros((box[0], box[1], box[2]))
    facet = np.zeros((n_face, box[0], box[1], box[2]))
    moment = np.zeros((box[0], box[1], box[2], 3))
    room = rings.shape[1] + n_face + 8
    polygon = np.empty((room, 3))
    spare = np.empty((room, 3))
    active = np.empty(n_face, dtype=np.int64)
    touching = np.empty(n_face, dtype=np.int64)
    centre = np.empty(3)
    side = np.zeros(3)
    for i in range(box[0]):
        for j in range(box[1]):
            for k in range(box[2]):
                centre[0] = i + 0.5 - origin[0]
                centre[1] = j + 0.5 - origin[1]
                centre[2] = k + 0.5 - origin[2]
                count, lying = 0, 0
                empty = False
                for f in range(n_face):
                    n = normals[f]
                    inside = distances[f] - np.dot(n, centre)
                    reach = 0.5 * (abs(n[0]) + abs(n[1]) + abs(n[2]))
                    if inside <= -reach + _ON_PLANE:
                        empty = True
                        break
                    if inside < reach - _ON_PLANE:
                        active[count] = f
                        count += 1
                    elif inside <= reach + _ON_PLANE:
                        touching[lying] = f
                        lying += 1
                if empty:
                    continue
                for a in range(lying):
                    f = touching[a]
                    number = _within(rings[f], sizes[f], centre, side, polygon, spare)
                    facet[f, i, j, k] = _area(polygon, number, normals[f])
                if count == 0:
                    fill[i, j, k] = 1.0
                    continue
                volume = 0.0
                for axis in range(3):
                    u, v = (axis + 1) % 3, (axis + 2) % 3
                    for sign in (-1.0, 1.0):
                        side[:] = 0.0
                        side[axis] = sign
                        for corner in range(4):
                            polygon[corner, axis] = 0.5 * sign
                            polygon[corner, u] = 0.5 * sign * (-1.0 if corner in (0, 3) else 1.0)
                            polygon[corner, v] = -0.5 if corner < 2 else 0.5
                        number = 4
                        for a in range(count):
                            f = active[a]
                            distance = distances[f] - np.dot(normals[f], centre)
                            number = _clip(polygon, number, normals[f], distance, spare)
                        area = _area(polygon, number, side)
                        volume += 0.5 * area / 3.0
                        moment[i, j, k, axis] += sign * area / 8.0
                for a in range(count):
                    f = active[a]
                    number = _within(rings[f], sizes[f], centre, side, polygon, spare)
                    area = _area(polygon, number, normals[f])
                    facet[f, i, j, k] = area
                    for axis in range(3):
                        square = _square(polygon, number, axis, area)
                        moment[i, j, k, axis] += 0.5 * normals[f, axis] * square
                    volume += (distances[f] - np.dot(normals[f], centre)) * area / 3.0
                fill[i, j, k] = volume
    return fill, facet, moment


def polyhedron_overlap(
    body: Polyhedron, origin: Floats, box: tuple[int, int, int]
) -> tuple[Floats, Floats, Floats]:
    """Fill fraction of every cell of a box, and the area of every face inside it.

    Parameters
    ----------
    body : Polyhedron
        Turned and scaled so that the edge of a cell is 1.
    origin : float64 (3,)
        Place of the body's origin in the box, in cells from its lowest corner.
    box : tuple of 3 int

    Returns
    -------
    fill : float64 box
        In [0, 1]; 1 in cells that the surface does not enter.
    facet : float64 (n_face,) + box
        In units of a cell's face; a face that lies on faces of cells belongs to those inside.
    moment : float64 box + (3,)
        Integral over the body's part of the cell of the position from the cell's centre.
    """
    normals, distances = body.planes
    longest = max(len(face) for face in body.faces)
    rings = np.zeros((len(body.faces), longest, 3))
    for ring, face in zip(rings, body.faces, strict=True):
        ring[: len(face)] = body.corners[list(face)]
    sizes = np.array([len(face) for face in body.faces])
    fill, facet, moment = _cells(
        normals, distances, rings, sizes, np.asarray(origin, dtype=np.float64), np.array(box)
    )
    return np.clip(fill, 0.0, 1.0), np.maximum(facet, 0.0), moment
