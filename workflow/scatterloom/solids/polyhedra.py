"""Regular polyhedra, and prisms whose ends are tilted or indented."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import product

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.facets import faceted_mesh, hull_faces
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

_GOLDEN = 0.5 * (1.0 + math.sqrt(5.0))


def regular_corners(faces: int) -> Floats:
    """Corners of the regular polyhedron with so many faces, at the distance 1 from its centre.

    As many of the planes x = 0, y = 0, z = 0 as can be are mirror planes: two of a tetrahedron,
    all three of the others.

    Parameters
    ----------
    faces : int
        4, 6, 8, 12 or 20.
    """
    points: list[Sequence[float] | Floats]
    cube: list[Sequence[float] | Floats] = list(product((-1.0, 1.0), repeat=3))
    match faces:
        case 4:
            root = math.sqrt(2.0)
            points = [(root, 0.0, 1.0), (-root, 0.0, 1.0), (0.0, root, -1.0), (0.0, -root, -1.0)]
        case 6:
            points = cube
        case 8:
            points = [sign * row for row in np.eye(3) for sign in (-1.0, 1.0)]
        case 12:
            plane = [(0.0, s / _GOLDEN, t * _GOLDEN) for s, t in product((-1.0, 1.0), repeat=2)]
            points = cube + [tuple(np.roll(point, k)) for k in range(3) for point in plane]
        case 20:
            plane = [(0.0, s, t * _GOLDEN) for s, t in product((-1.0, 1.0), repeat=2)]
            points = [tuple(np.roll(point, k)) for k in range(3) for point in plane]
        case _:
            raise ValueError(f"no regular polyhedron has {faces} faces")
    corners = np.array(points)
    return corners / np.linalg.norm(corners[0])


def regular(faces: int) -> Mesh:
    """The regular polyhedron with 4, 6, 8, 12 or 20 faces."""
    return faceted_mesh(*hull_faces(regular_corners(faces)))


def base_ring(sides: int) -> Floats:
    """Corners of a regular polygon in the unit circle, the first one on x, float64 (sides, 2)."""
    angle = 2.0 * np.pi * np.arange(sides) / sides
    ring = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    ring[np.abs(ring) < 1e-15] = 0.0
    return ring


def tilted_prism(
    sides: int, height_to_width: float, upper_tilt_deg: float, lower_tilt_deg: float
) -> tuple[Floats, list[list[int]]]:
    """Corners and faces of a prism whose ends are tilted about y; base radius 1.

    Both ends rise towards +x by the tangents of their tilts. The height is that along the axis,
    and the volume that of the right prism.

    Raises
    ------
    ValueError
        If the ends meet.
    """
    ring, half = base_ring(sides), height_to_width
    upper = half + math.tan(math.radians(upper_tilt_deg)) * ring[:, 0]
    lower = -half + math.tan(math.radians(lower_tilt_deg)) * ring[:, 0]
    if (upper - lower).min() < 1e-3 * half:
        raise ValueError("the tilted ends of the prism meet")
    corners = np.concatenate([np.column_stack([ring, lower]), np.column_stack([ring, upper])])
    return corners, _prism_faces(sides)


def _prism_faces(sides: int) -> list[list[int]]:
    ring = list(range(sides))
    faces = [ring[::-1], [sides + i for i in ring]]
    for i in ring:
        after = (i + 1) % sides
        faces.append([i, after, sides + after, sides + i])
    return faces


def indented_prism(sides: int, height_to_width: float, indentation: float) -> Mesh:
    """A prism with a hollow pyramid in either end; base radius 1.

    Parameters
    ----------
    indentation : float
        Depth of each pyramid over half the height, from 0 to below 1. The volume is that of
        the right prism times 1 - indentation / 3.
    """
    ring, half = base_ring(sides), height_to_width
    level = np.full(sides, half)
    tips = [(0.0, 0.0, -half * (1.0 - indentation)), (0.0, 0.0, half * (1.0 - indentation))]
    corners = np.concatenate(
        [np.column_stack([ring, -level]), np.column_stack([ring, level]), tips]
    )
    faces = _prism_faces(sides)[2:]
    for i in range(sides):
        after = (i + 1) % sides
        faces += [[after, i, 2 * sides], [sides + i, sides + after, 2 * sides + 1]]
    return faceted_mesh(corners, faces)
