"""Convex polyhedra by their corners and faces."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_UNIT_VOLUME = 4.0 * math.pi / 3.0


# Compared and hashed by identity: it holds arrays.
@dataclass(frozen=True, eq=False)
class Polyhedron:
    """A convex polyhedron that holds the origin.

    Attributes
    ----------
    corners : float64 (n_corner, 3)
    faces : tuple of tuple of int
        Corners of every face, counterclockwise seen from outside.
    """

    corners: NDArray[np.float64]
    faces: tuple[tuple[int, ...], ...]

    @property
    def area_vectors(self) -> NDArray[np.float64]:
        """Outward normal times area of every face, float64 (n_face, 3)."""
        out = np.zeros((len(self.faces), 3))
        for vector, face in zip(out, self.faces, strict=True):
            ring = self.corners[list(face)]
            vector[:] = 0.5 * np.cross(ring, np.roll(ring, -1, axis=0)).sum(axis=0)
        return out

    @property
    def planes(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Unit outward normals (n_face, 3) and distances of the faces from the origin (n_face,)."""
        vectors = self.area_vectors
        normals = vectors / np.linalg.norm(vectors, axis=1, keepdims=True)
        first = self.corners[[face[0] for face in self.faces]]
        return normals, np.sum(normals * first, axis=1)

    @property
    def volume(self) -> float:
        """Volume, from the divergence theorem."""
        first = self.corners[[face[0] for face in self.faces]]
        return float(np.sum(self.area_vectors * first)) / 3.0


def convex_polyhedron(corners: NDArray[np.float64], faces: Sequence[Sequence[int]]) -> Polyhedron:
    """Polyhedron of volume 4 pi / 3 in the proportions of the corners given.

    Raises
    ------
    ValueError
        If the faces are not flat, not convex, turned inwards, or do not close a body
        around the origin.
    """
    raw = Polyhedron(np.asarray(corners, dtype=np.float64), tuple(tuple(f) for f in faces))
    if not raw.volume > 0.0:
        raise ValueError(f"the faces enclose the volume {raw.volume:g}, should be positive")
    body = Polyhedron(raw.corners * math.cbrt(_UNIT_VOLUME / raw.volume), raw.faces)
    normals, distances = body.planes
    beyond = body.corners @ normals.T - distances
    for number, face in enumerate(body.faces):
        if np.abs(beyond[list(face), number]).max() > 1e-12:
            raise ValueError(f"the corners of face {number} do not lie in one plane")
    if distances.min() <= 0.0 or beyond.max() > 1e-12:
        raise ValueError("the polyhedron is not convex or does not hold the origin")
    if np.abs(body.area_vectors.sum(axis=0)).max() > 1e-12:
        raise ValueError("the faces do not close: their area vectors do not add to zero")
    return body


def cuboid(edges: Sequence[float]) -> Polyhedron:
    """Cuboid with edges in these proportions along x, y, z."""
    signs = np.array([(x, y, z) for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)])
    faces = [(0, 1, 3, 2), (4, 6, 7, 5), (0, 4, 5, 1), (2, 3, 7, 6), (0, 2, 6, 4), (1, 5, 7, 3)]
    return convex_polyhedron(0.5 * signs * np.asarray(edges), faces)


def prism(sides: int, height_to_width: float) -> Polyhedron:
    """Right prism on a regular base in the xy plane, with a corner of the base on the x axis.

    The width is the diameter of the circle through the corners of the base: for a
    hexagon with sides a it is 2 a.
    """
    angle = 2.0 * np.pi * np.arange(sides) / sides
    x, y = np.cos(angle), np.sin(angle)
    # Exact mirror images where the base has them.
    x[np.abs(x) < 1e-15], y[np.abs(y) < 1e-15] = 0.0, 0.0
    z = np.full(sides, height_to_width)
    corners = np.concatenate([np.stack([x, y, -z], axis=1), np.stack([x, y, z], axis=1)])
    ring = range(sides)
    faces: list[tuple[int, ...]] = [tuple(reversed(ring)), tuple(sides + i for i in ring)]
    for i in ring:
        after = (i + 1) % sides
        faces.append((i, after, sides + after, sides + i))
    return convex_polyhedron(corners, faces)
