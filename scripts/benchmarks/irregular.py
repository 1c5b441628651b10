"""A particle without any symmetry: the convex hull of random points."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from scipy.spatial import ConvexHull

from scatterloom.particle.polyhedron import Polyhedron, convex_polyhedron
from scatterloom.particle.shapes import Faceted

SEED = 4
CORNERS = 14
STRETCH = (1.25, 1.0, 0.8)
"""Of the ball in whose surface the corners are drawn."""


@lru_cache(maxsize=4)
def irregular_polyhedron(seed: int = SEED) -> Faceted:
    """Hull of `CORNERS` points drawn on an ellipsoid, about its centre of volume.

    No two faces are alike, nothing is parallel to the lattice, and no symmetry is left.
    """
    random = np.random.default_rng(seed)
    drawn = random.normal(size=(CORNERS, 3))
    points = drawn / np.linalg.norm(drawn, axis=1, keepdims=True) * STRETCH
    hull = ConvexHull(points)
    corners = points - _centre(points, hull)
    # The hull does not say which way round its triangles go; their planes tell.
    faces = []
    for (a, b, c), plane in zip(hull.simplices, hull.equations, strict=True):
        outward = np.cross(points[b] - points[a], points[c] - points[a]) @ plane[:3] > 0.0
        faces.append((a, b, c) if outward else (a, c, b))
    body: Polyhedron = convex_polyhedron(corners, [tuple(int(i) for i in f) for f in faces])
    return Faceted("irregular", body, tuple(float(x) for x in body.corners.ravel()))


def _centre(points: np.ndarray, hull: ConvexHull) -> np.ndarray:
    """Centre of volume, from the tetrahedra over all faces."""
    inner = points.mean(axis=0)
    edges = points[hull.simplices] - inner
    volume = np.abs(np.linalg.det(edges))
    return inner + (volume / volume.sum()) @ edges.sum(axis=1) / 4.0
