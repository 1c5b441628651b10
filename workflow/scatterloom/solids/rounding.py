"""Convex polyhedra with rounded edges: what a ball rolled inside them reaches."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import linprog
from scipy.spatial import HalfspaceIntersection

from scatterloom.solids.balance import balanced
from scatterloom.solids.facets import hull_faces
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

SAGITTA = 4e-4
"""How far arcs of the edges rise above their chords at most, over the largest distance of a
corner from the centre; volumes stay within the square of this (see `balanced`)."""


def inscribed_ball(normals: Floats, distances: Floats) -> tuple[Floats, float]:
    """Centre and radius of the largest ball between planes normals @ x <= distances."""
    found = linprog(
        [0.0, 0.0, 0.0, -1.0],
        A_ub=np.column_stack([normals, np.ones(len(normals))]),
        b_ub=distances,
        bounds=[(None, None)] * 3 + [(0.0, None)],
    )
    return found.x[:3], float(found.x[3])


def planes(corners: Floats, faces: Sequence[Sequence[int]]) -> tuple[Floats, Floats]:
    """Unit outward normals (n, 3) of faces and their distances (n,) from the origin."""
    normals = []
    for face in faces:
        ring = corners[list(face)]
        vector = np.cross(ring, np.roll(ring, -1, axis=0)).sum(axis=0)
        normals.append(vector / np.linalg.norm(vector))
    first = corners[[face[0] for face in faces]]
    return np.array(normals), np.sum(np.array(normals) * first, axis=1)


class Rounded:
    """A convex polyhedron after opening with a ball: shrunk by its radius, then grown by it.

    Parameters
    ----------
    corners : float64 (n, 3)
    faces : sequence of sequence of int
    fraction : float
        Radius of the ball over that of the largest ball inside the polyhedron.
    """

    def __init__(self, corners: Floats, faces: Sequence[Sequence[int]], fraction: float) -> None:
        normals, distances = planes(corners, faces)
        middle, largest = inscribed_ball(normals, distances)
        self.radius = fraction * largest
        shrunk = np.column_stack([normals, self.radius - distances])
        points = HalfspaceIntersection(shrunk, middle).intersections
        # Corners that several planes share are found once for each.
        size = np.ptp(corners, axis=0).max()
        points = points[np.unique(np.round(points / size, 9), axis=0, return_index=True)[1]]
        self.corners, self.faces = hull_faces(points)
        self.normals, _ = planes(self.corners, self.faces)
        self.edges = _edges(self.faces)

    def steiner(self) -> tuple[float, float]:
        """Volume and area by the formula of Steiner: V + A r + M r^2 + 4 pi r^3 / 3."""
        r = self.radius
        area = volume = bend = 0.0
        for face, normal in zip(self.faces, self.normals, strict=True):
            ring = self.corners[face]
            part = 0.5 * float(np.cross(ring, np.roll(ring, -1, axis=0)).sum(axis=0) @ normal)
            area += part
            volume += part * float(ring[0] @ normal) / 3.0
        for (i, j), (f, g) in self.edges.items():
            turn = math.acos(float(np.clip(self.normals[f] @ self.normals[g], -1.0, 1.0)))
            bend += 0.5 * float(np.linalg.norm(self.corners[i] - self.corners[j])) * turn
        return (
            volume + area * r + bend * r**2 + 4.0 * math.pi * r**3 / 3.0,
            area + 2.0 * bend * r + 4.0 * math.pi * r**2,
        )

    def mesh(self) -> Mesh:
        """Its surface. A rounded edge belongs half to either face: where the ball is smaller
        than a cell, an edge is what it is."""
        turn = max(
            math.acos(float(np.clip(self.normals[f] @ self.normals[g], -1.0, 1.0)))
            for f, g in self.edges.values()
        )
        reach = float(np.linalg.norm(self.corners, axis=1).max()) + self.radius
        parts = max(4, math.ceil(turn * math.sqrt(self.radius / (8.0 * SAGITTA * reach))))
        return _Builder(self, parts + parts % 2).mesh()


def _edges(faces: Sequence[Sequence[int]]) -> dict[tuple[int, int], tuple[int, int]]:
    """Faces on the left and on the right of every edge (i, j) with i < j."""
    left: dict[tuple[int, int], int] = {}
    for number, face in enumerate(faces):
        for k, i in enumerate(face):
            left[i, face[(k + 1) % len(face)]] = number
    return {(i, j): (left[i, j], left[j, i]) for i, j in left if i < j}


class _Builder:
    """Triangles of a rounded polyhedron: places on the shrunk one and directions from there."""

    def __init__(self, body: Rounded, parts: int) -> None:
        self.body, self.parts = body, parts
        self.number: dict[tuple[object, ...], int] = {}
        self.place: list[Floats] = []
        self.direction: list[Floats] = []
        self.triangles: list[tuple[int, int, int]] = []

    def at(self, corner: int, weights: dict[int, int], centre: Floats | None = None) -> int:
        """Point above a corner, in the direction that normals of faces mix to.

        Weight -1 counts for the middle of the corner's faces.
        """
        key = (corner, *sorted((f, w) for f, w in weights.items() if w))
        if key not in self.number:
            mixed = np.zeros(3)
            for face, weight in weights.items():
                mixed += weight * (
                    self.body.normals[face] if face >= 0 or centre is None else centre
                )
            self.number[key] = self.add(self.body.corners[corner], mixed)
        return self.number[key]

    def add(self, place: Floats, direction: Floats) -> int:
        self.place.append(place)
        self.direction.append(direction / np.linalg.norm(direction))
        return len(self.place) - 1

    def mesh(self) -> Mesh:
        body, m = self.body, self.parts
        for number, face in enumerate(body.faces):
            ring = [self.at(corner, {number: m}) for corner in face]
            self._around(ring)
        for (i, j), (f, g) in body.edges.items():
            # g lies on the right of i -> j
            for step in range(m):
                here, there = {f: m - step, g: step}, {f: m - step - 1, g: step + 1}
                self._around([self.at(i, here), self.at(i, there),
                              self.at(j, there), self.at(j, here)])  # fmt: skip
        for corner in range(len(body.corners)):
            self._patch(corner)
        triangles = np.array(self.triangles, dtype=np.int32)
        direction = np.array(self.direction)
        place = np.array(self.place)
        corners = place + body.radius * direction

        def between(i: NDArray[np.int64], j: NDArray[np.int64]) -> Floats:
            mean = direction[i] + direction[j]
            mean /= np.linalg.norm(mean, axis=1, keepdims=True)
            return 0.5 * (place[i] + place[j]) + body.radius * mean

        looks = direction[triangles].sum(axis=1)
        piece = np.argmax(looks @ body.normals.T - 1e-9 * np.arange(len(body.normals)), axis=1)
        return Mesh(balanced(corners, triangles, between), triangles, piece.astype(np.int32))

    def _around(self, ring: list[int]) -> None:
        """Triangles between a ring of points and their middle, which favour no diagonal."""
        count = len(ring)
        middle = self.add(
            sum(self.place[p] for p in ring) / count,  # type: ignore[arg-type]
            sum(self.direction[p] for p in ring),  # type: ignore[arg-type]
        )
        self.triangles += [(ring[k], ring[(k + 1) % count], middle) for k in range(count)]

    def _patch(self, corner: int) -> None:
        """The part of a sphere around a corner, a fan of triangles about its middle."""
        around = [(f, g) for (i, j), (f, g) in self.body.edges.items() if corner == i]
        around += [(g, f) for (i, j), (f, g) in self.body.edges.items() if corner == j]
        centre = self.body.normals[[f for f, _ in around]].sum(axis=0)
        centre /= np.linalg.norm(centre)
        m = self.parts
        for left, right in around:
            # Leaving the corner, the face on the right comes before that on the left.
            at = {
                (p, q): self.at(corner, {-1: m - p - q, right: p, left: q}, centre)
                for p in range(m + 1) for q in range(m + 1 - p)
            }  # fmt: skip
            for p in range(m):
                for q in range(m - p):
                    self.triangles.append((at[p, q], at[p + 1, q], at[p, q + 1]))
                    if p + q < m - 1:
                        self.triangles.append((at[p + 1, q], at[p + 1, q + 1], at[p, q + 1]))
