"""Where a solid lies about the origin: its centre, extents and mirror planes."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull, KDTree

from scatterloom.solids.mesh import MEDIUM, Interface, Mesh, Solid, Symmetry
from scatterloom.solids.registry import build

Floats = NDArray[np.float64]

_CLEARLY_SMALLER = 0.98
"""The centre of mass is the centre unless another one makes the sphere around smaller than
this: wave bases grow with that sphere. Cut at the same degree, they lose as much about either
centre for cones, and a tenth as much about the sphere's for a rod on a block (measured)."""

_SAME_PLACE = 1e-9
"""Distance of corners that count as one, over the radius of the sphere around."""


def placed(spec: Mapping[str, Any]) -> Solid:
    """The solid of a shape with the volume 4 pi / 3 about its centre, and its core if it has one.

    Raises
    ------
    ValueError
        If the kind is unknown, the body cannot be made, or cannot hold a core.
    """
    solid = _placed(build(spec))
    core = spec.get("core_radius_fraction")
    return solid if core is None else _cored(solid, float(core))


@lru_cache(maxsize=64)
def _placed(solid: Solid) -> Solid:
    if not solid.volume > 0.0:
        raise ValueError(f"the surfaces enclose the volume {solid.volume:g}: turn them inside out")
    return solid.normalized(np.zeros(3) if solid.symmetry is not None else centre(solid))


@lru_cache(maxsize=64)
def _cored(solid: Solid, scale: float) -> Solid:
    if len(solid.interfaces) != 1 or solid.interfaces[0].beyond is not None:
        raise ValueError("only a body of one material without hollows can hold a core of its "
                         "shape; leave the coating out")  # fmt: skip
    mesh = solid.interfaces[0].mesh
    first = mesh.corners[mesh.triangles[:, 0]]
    if np.sum(mesh.area_vectors * first, axis=1).min() <= 0.0:
        raise ValueError("a core of this shape would stick out, since parts of the surface are "
                         "hidden from the centre; leave the coating out")  # fmt: skip
    core = Interface(mesh.moved(np.zeros(3), scale), 1, 0)
    return Solid((*solid.interfaces, core), solid.symmetry)


def outer_corners(solid: Solid) -> Floats:
    """Corners of all surfaces that face the medium, float64 (n, 3)."""
    faces = [f.mesh for f in solid.interfaces if f.outside == MEDIUM]
    return np.concatenate([mesh.corners[np.unique(mesh.triangles)] for mesh in faces])


def centre(solid: Solid) -> Floats:
    """Centre of mass, or that of the smallest sphere around if it is clearly smaller."""
    volumes, centres = [], []
    for face in solid.interfaces:
        sign = (face.inside != MEDIUM) - (face.outside != MEDIUM)
        volumes.append(sign * face.mesh.volume)
        centres.append(face.mesh.centroid)
    mass = np.array(volumes) @ np.array(centres) / sum(volumes)
    corners = outer_corners(solid)
    ball, radius = smallest_sphere(corners)
    reach = np.linalg.norm(corners - mass, axis=1).max()
    return ball if radius < _CLEARLY_SMALLER * reach else mass


def smallest_sphere(points: Floats) -> tuple[Floats, float]:
    """Centre and radius of the smallest sphere that holds all points (n, 3).

    The farthest point outside joins those on the sphere, and the smallest sphere through some of
    these that holds them all takes its place, until no point is left outside: the radius
    grows in every step.
    """
    points = points[ConvexHull(points).vertices]
    support = points[[0, np.linalg.norm(points - points[0], axis=1).argmax()]]
    middle, radius, support = _around(support)
    while True:
        away = np.linalg.norm(points - middle, axis=1)
        if away.max() <= radius * (1.0 + 1e-13):
            return middle, float(away.max())
        found = _around(np.concatenate([support, points[[away.argmax()]]]))
        if found[1] <= radius:  # rounding
            return middle, float(away.max())
        middle, radius, support = found


def _around(points: Floats) -> tuple[Floats, float, Floats]:
    """Smallest sphere around up to five points: centre, radius, the points on it."""
    best: tuple[Floats, float, Floats] | None = None
    for count in range(2, min(len(points), 4) + 1):
        for chosen in itertools.combinations(range(len(points)), count):
            on = points[list(chosen)]
            edges = on[1:] - on[0]
            # The centre lies in the plane of the points, as far from each as from the first.
            shift = np.linalg.lstsq(edges, 0.5 * np.sum(edges**2, axis=1), rcond=None)[0]
            radius = float(np.linalg.norm(shift))
            away = np.linalg.norm(points - on[0] - shift, axis=1).max()
            if away <= radius * (1.0 + 1e-12) and (best is None or radius < best[1]):
                best = on[0] + shift, radius, on
    assert best is not None
    return best


def half_extents(solid: Solid) -> Floats:
    """Largest distance from the origin along x, y, z, float64 (3,)."""
    return np.abs(outer_corners(solid)).max(axis=0)


def circumscribed_radius(solid: Solid) -> float:
    """Radius of the smallest sphere about the origin that holds the solid."""
    return float(np.linalg.norm(outer_corners(solid), axis=1).max())


def symmetry(solid: Solid) -> Symmetry:
    """Symmetry as stated with the solid, or found from its corners and edges."""
    if solid.symmetry is not None:
        return solid.symmetry
    return "mirrors" if all(is_mirrored(solid, axis) for axis in np.eye(3)) else "none"


def is_mirrored(solid: Solid, normal: Floats) -> bool:
    """Whether the plane through the origin with this unit normal is a mirror plane."""
    if solid.symmetry in ("sphere", "axial", "mirrors") and np.abs(normal).max() == 1.0:
        return True
    pairs: dict[tuple[int, int], list[Mesh]] = {}
    for face in solid.interfaces:
        pairs.setdefault((face.inside, face.outside), []).append(face.mesh)
    near = _SAME_PLACE * circumscribed_radius(solid)
    return all(
        _is_own_image(np.concatenate([part(mesh) for mesh in meshes]), normal, near)
        for meshes in pairs.values()
        for part in (_used_corners, _edge_centres)
    )


def _is_own_image(points: Floats, normal: Floats, near: float) -> bool:
    image = points - 2.0 * np.outer(points @ normal, normal)
    return bool(KDTree(points).query(image)[0].max() <= near) if len(points) else True


def _used_corners(mesh: Mesh) -> Floats:
    return mesh.corners[np.unique(mesh.triangles)]


def _edge_centres(mesh: Mesh) -> Floats:
    """Centres of all edges at which the surface bends: lines drawn on flat faces do not count."""
    unit = mesh.area_vectors
    unit = unit / np.linalg.norm(unit, axis=1, keepdims=True)
    ends = np.sort(mesh.triangles[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1)
    edges, which = np.unique(ends, axis=0, return_inverse=True)
    which = which.ravel()
    # The sum of the unit normals at an edge is as long as there are triangles if all agree.
    total = np.zeros((len(edges), 3))
    np.add.at(total, which, np.repeat(unit, 3, axis=0))
    flat = np.linalg.norm(total, axis=1) > np.bincount(which) - 1e-12
    return mesh.corners[edges[~flat]].mean(axis=1)
