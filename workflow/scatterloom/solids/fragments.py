"""Irregular polyhedra with a seed: hulls of points, Voronoi cells, rough facets."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import HalfspaceIntersection

from scatterloom.solids.facets import faceted_mesh, hull_faces
from scatterloom.solids.globe import directions
from scatterloom.solids.mesh import Mesh
from scatterloom.solids.seeds import generator, random_direction, random_in_ball

Floats = NDArray[np.float64]
Faces = tuple[Floats, list[list[int]]]

_AROUND = 5.0
"""Radius of the ball of points around a Voronoi cell, in mean spacings: about 520 points. The
next ones could cut a cell that reaches over 2.5 spacings, which is refused."""


def random_hull(points: int, seed: int) -> Faces:
    """Convex hull of points in a ball, all places alike: corners and faces."""
    rng = generator(seed)
    return hull_faces(np.array([random_in_ball(rng) for _ in range(points)]))


def voronoi_cell(seed: int, stretch: tuple[float, float, float] = (1.0, 1.0, 1.0)) -> Faces:
    """Typical cell of a Poisson point process of unit density: corners and faces.

    The cell of a point added at the origin is the typical one (Slivnyak's theorem).

    Parameters
    ----------
    seed : int
    stretch : tuple of 3 float
        Lengths along x, y, z are multiplied by these.

    Raises
    ------
    ValueError
        If the cell reaches so far that points not made could cut it.
    """
    rng = generator(seed)
    count = int(rng.poisson(4.0 * math.pi / 3.0 * _AROUND**3))
    points = _AROUND * np.array([random_in_ball(rng) for _ in range(count)])
    # nearer to the origin than to p: x . p <= p . p / 2
    planes = np.column_stack([points, -0.5 * np.sum(points**2, axis=1)])
    corners = HalfspaceIntersection(planes, np.zeros(3)).intersections
    if np.linalg.norm(corners, axis=1).max() > 0.5 * _AROUND:
        raise ValueError(f"the Voronoi cell of seed {seed} is too large, take another seed")
    return hull_faces(corners * np.array(stretch))


def rough_facets(parts: int, rms: float, seed: int) -> Mesh:
    """A sphere of 20 parts^2 triangular facets whose corners are moved in and out.

    Parameters
    ----------
    parts : int
        See `scatterloom.solids.globe.directions`.
    rms : float
        Root mean square of the radii of the corners about their mean, over the mean: met
        exactly.
    seed : int

    Raises
    ------
    ValueError
        If a corner would come nearer to the centre than 0.2 mean radii.
    """
    rng = generator(seed)
    unit, triangles = directions(parts)
    # turned at random: no axis of the icosahedron is in any way special
    unit = unit @ _frame(rng).T
    height = rng.standard_normal(len(unit))
    height -= height.mean()
    radius = 1.0 + rms * height / math.sqrt(float(np.mean(height**2)))
    if radius.min() < 0.2:
        raise ValueError(f"a roughness of {rms:g} moves a corner to {radius.min():.2g} mean radii")
    return faceted_mesh(unit * radius[:, None], triangles.tolist())


def _frame(rng: np.random.Generator) -> Floats:
    z = random_direction(rng)
    x = np.cross(z, random_direction(rng))
    x /= np.linalg.norm(x)
    return np.stack([x, np.cross(z, x), z], axis=1)
