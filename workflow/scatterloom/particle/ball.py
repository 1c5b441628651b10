"""Exact overlap of the unit ball with the cells of an oblique lattice, in closed form.

An affine map turns an ellipsoid on a turned or shifted cubic lattice into the unit ball on
a lattice of equal parallelepipeds, and keeps volume fractions. The ball's part in a
polyhedron is a sum over the polyhedron's faces of signed cones with their tips at the
centre of the ball: under the part of a face within the ball lies a cone of a third of
height times area, under the part beyond it a third of the solid angle that it covers.
Both are sums over edges of triangles and circular sectors about the foot of the
perpendicular on the face (tan(solid angle/2): Van Oosterom & Strackee 1983, IEEE Trans.
Biomed. Eng. 30, 125).
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.particle.overlap import FULL

Floats = NDArray[np.float64]


@njit(cache=True)
def _edge(ax, ay, bx, by, height, radius2):  # type: ignore[no-untyped-def]
    """Part of one edge in the wet area and in the solid angle beyond the ball.

    `a`, `b` are its ends seen from the foot of the perpendicular of length `height`,
    `radius2` the squared radius of the disc that the ball cuts from the face's plane.
    """
    dx, dy = bx - ax, by - ay
    length2 = dx * dx + dy * dy
    if length2 == 0.0:
        return 0.0, 0.0
    cuts = np.empty(4)
    cuts[0], number = 0.0, 1
    if radius2 > 0.0:
        nearest = -(ax * dx + ay * dy) / length2
        lateral = ax * dy - ay * dx
        reach = radius2 / length2 - (lateral / length2) ** 2
        if reach > 0.0:
            half = math.sqrt(reach)
            for at in (nearest - half, nearest + half):
                if 0.0 < at < 1.0:
                    cuts[number] = at
                    number += 1
    cuts[number] = 1.0
    wet, beyond = 0.0, 0.0
    for piece in range(number):
        low, high = cuts[piece], cuts[piece + 1]
        middle = 0.5 * (low + high)
        mx, my = ax + middle * dx, ay + middle * dy
        px, py, qx, qy = ax + low * dx, ay + low * dy, ax + high * dx, ay + high * dy
        cross, dot = px * qy - py * qx, px * qx + py * qy
        if mx * mx + my * my < radius2:
            wet += 0.5 * cross
            continue
        far_p = math.sqrt(px * px + py * py + height * height)
        far_q = math.sqrt(qx * qx + qy * qy + height * height)
        denominator = far_p * far_q + height * (far_p + far_q) + dot + height * height
        covered = 2.0 * math.atan2(cross, denominator)
        if radius2 > 0.0:
            angle = math.atan2(cross, dot)
            wet += 0.5 * radius2 * angle
            covered -= (1.0 - height) * angle
        beyond += covered
    return wet, beyond


@njit(cache=True)
def _face(corner, u, v, normal):  # type: ignore[no-untyped-def]
    """Wet area of a parallelogram, and the volume of the ball's part in the cone over it."""
    signed = np.dot(corner, normal)
    height = abs(signed)
    radius2 = 1.0 - height * height
    first = u / math.sqrt(np.dot(u, u))
    second = np.cross(normal, first)
    x = np.empty(4)
    y = np.empty(4)
    for n in range(4):
        at = corner.copy()
        if n in (1, 2):
            at += u
        if n >= 2:
            at += v
        x[n], y[n] = np.dot(at, first), np.dot(at, second)
    wet, beyond = 0.0, 0.0
    for n in range(4):
        m = (n + 1) % 4
        w, b = _edge(x[n], y[n], x[m], y[m], height, radius2)
        wet += w
        beyond += b
    cone = (height * wet + beyond) / 3.0
    return wet, cone if signed > 0.0 else -cone


@njit(cache=True)
def _cells(edges, origin, box):  # type: ignore[no-untyped-def]
    """Fill and surface vector; `edges` holds the edges of a cell as rows."""
    fill = np.zeros((box[0], box[1], box[2]))
    vector = np.zeros((box[0], box[1], box[2], 3))
    normals = np.empty((3, 3))
    areas = np.empty(3)
    for axis in range(3):
        across = np.cross(edges[(axis + 1) % 3], edges[(axis + 2) % 3])
        areas[axis] = math.sqrt(np.dot(across, across))
        normals[axis] = across / areas[axis]
    whole = abs(np.dot(edges[0], np.cross(edges[1], edges[2])))
    diagonal = edges[0] + edges[1] + edges[2]
    reach2 = 0.0
    for a in (-1.0, 1.0):
        for b in (-1.0, 1.0):
            half = 0.5 * (a * edges[0] + b * edges[1] + edges[2])
            reach2 = max(reach2, np.dot(half, half))
    farthest = (1.0 + math.sqrt(reach2)) ** 2
    # A cell that reaches beyond the ball is never full, not even around its centre.
    nearest = (1.0 - math.sqrt(reach2)) ** 2 if reach2 < 1.0 else -1.0
    wet = np.empty(2)
    for i in range(box[0]):
        for j in range(box[1]):
            for k in range(box[2]):
                low = (i - origin[0]) * edges[0]
                low = low + (j - origin[1]) * edges[1] + (k - origin[2]) * edges[2]
                centre = low + 0.5 * diagonal
                distance2 = np.dot(centre, centre)
                if distance2 >= farthest:
                    continue
                if distance2 <= nearest:
                    fill[i, j, k] = 1.0
                    continue
                volume = 0.0
                for axis in range(3):
                    u, v = edges[(axis + 1) % 3], edges[(axis + 2) % 3]
                    high = low + edges[axis]
                    wet[0], cone = _face(low, v, u, -normals[axis])
                    volume += cone
                    wet[1], cone = _face(high, u, v, normals[axis])
                    volume += cone
                    # Divergence theorem, as for the cells of the aligned lattice.
                    vector[i, j, k, axis] = (wet[0] - wet[1]) / areas[axis]
                fraction = volume / whole
                if fraction >= FULL:
                    fraction = 1.0
                if fraction >= 1.0 or fraction <= 0.0:
                    fraction = max(0.0, min(1.0, fraction))
                    vector[i, j, k] = 0.0
                fill[i, j, k] = fraction
    return fill, vector


def ball_overlap(edges: Floats, origin: Floats, box: tuple[int, int, int]) -> tuple[Floats, Floats]:
    """Fill fraction and surface vector of every cell of a box.

    Parameters
    ----------
    edges : float64 (3, 3)
        Edges of a cell as rows, in the space where the ellipsoid is the unit ball; a
        right-handed set.
    origin : float64 (3,)
        Place of the ball's centre in the box, in cells from its lowest corner.
    box : tuple of 3 int

    Returns
    -------
    fill : float64 box
        Volume fraction inside the ball, exactly 1 in full cells.
    area : float64 box + (3,)
        Integral of the outward normal over the surface inside the cell, along the axes of
        the *cubic* lattice and in units of a cell's face; 0 in cells the surface does not
        cross.
    """
    return _cells(
        np.ascontiguousarray(edges, dtype=np.float64),
        np.asarray(origin, dtype=np.float64),
        np.array(box),
    )
