"""Bodies within a body: layers, inclusions and pores."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree

from scatterloom.solids.globe import FINE, sphere_mesh
from scatterloom.solids.inside import distance_to, is_inside
from scatterloom.solids.mesh import Interface, Mesh, Solid
from scatterloom.solids.seeds import generator

Floats = NDArray[np.float64]

GAP = 0.02
"""Smallest gap between spheres placed at random, and to the surface, over their radius."""

_TRIES = 3000


def one_surface(solid: Solid, purpose: str) -> Mesh:
    """The mesh of a body of one material without hollows.

    Raises
    ------
    ValueError
        If there are several surfaces.
    """
    if len(solid.interfaces) != 1:
        raise ValueError(f"only a body of one material without hollows can hold {purpose}")
    return solid.interfaces[0].mesh


def unit_mesh(mesh: Mesh) -> Mesh:
    """The surface about its centroid with the volume 4 pi / 3."""
    return mesh.moved(-mesh.centroid, math.cbrt(4.0 * math.pi / 3.0 / mesh.volume))


def filled(host: Mesh, groups: Sequence[Mapping[str, Any]]) -> Solid:
    """Spheres of other materials, or empty ones, in a body.

    Parameters
    ----------
    host : Mesh
        About its centroid, with the volume 4 pi / 3: lengths are in its equal-volume radii.
    groups : sequence of mapping
        Placed one after the other. Each has ``material``, 1 and up or -1 for pores, and either
        ``centre`` (3 numbers) and ``radius``, or ``count``, ``volume_fraction`` (of the host) and
        ``seed`` for equal spheres at random places.

    Raises
    ------
    ValueError
        If a sphere touches the surface or another one, or there is no room for all.
    """
    centres, radii = np.zeros((0, 3)), np.zeros(0)
    faces = [Interface(host)]
    for group in groups:
        material = int(group["material"])
        if "centre" in group:
            centre, radius = np.array(group["centre"], dtype=float), float(group["radius"])
            _check_one(host, centres, radii, centre, radius)
            new = centre[None]
        else:
            count = int(group["count"])
            radius = math.cbrt(float(group["volume_fraction"]) / count)
            new = _placed(host, centres, radii, count, radius, int(group["seed"]))
        parts = max(8, 2 * math.ceil(0.5 * FINE * math.sqrt(radius)))
        for centre in new:
            ball = sphere_mesh(centre, radius, parts)
            faces.append(Interface(ball, material, 0))
        centres = np.concatenate([centres, new])
        radii = np.concatenate([radii, np.full(len(new), radius)])
    return Solid(tuple(faces))


def _check_one(host: Mesh, centres: Floats, radii: Floats, centre: Floats, radius: float) -> None:
    if not is_inside(host, centre):
        raise ValueError(f"the inclusion at {_text(centre)} has its centre outside the particle")
    room = distance_to(host, centre)
    if room <= radius:
        raise ValueError(
            f"the inclusion at {_text(centre)} with the radius {radius:g} touches the surface, "
            f"which is {room:.4g} away"
        )
    if len(radii):
        gap = np.linalg.norm(centres - centre, axis=1) - radii - radius
        if gap.min() <= 0.0:
            raise ValueError(f"the inclusion at {_text(centre)} touches another one")


def _placed(
    host: Mesh, centres: Floats, radii: Floats, count: int, radius: float, seed: int
) -> Floats:
    """Places of equal spheres, all places that are free alike (random sequential addition)."""
    rng = generator(seed)
    low, high = host.corners.min(axis=0), host.corners.max(axis=0)
    kept, sizes, room = centres, radii, (1.0 + GAP) * radius
    corners = KDTree(host.corners)
    tries = 0
    while len(kept) < len(centres) + count:
        tries += 1
        if tries > _TRIES:
            raise ValueError(
                f"no room was found for {count} spheres with the radius {radius:.3g}, only for "
                f"{len(kept) - len(centres)}"
            )
        place = rng.uniform(low, high)
        if len(sizes):
            gap = np.linalg.norm(kept - place, axis=1) - sizes - room
            if gap.min() < 0.0:
                continue
        # The nearest corner is no nearer than the surface: most places need nothing else.
        if corners.query(place)[0] < room:
            continue
        if not is_inside(host, place) or distance_to(host, place) < room:
            continue
        kept = np.concatenate([kept, [place]])
        sizes = np.concatenate([sizes, [radius]])
    return kept[len(centres) :]


def layered(host: Mesh, scales: Sequence[float]) -> Solid:
    """A body with smaller ones of its own shape inside one another, about its centroid.

    Parameters
    ----------
    host : Mesh
    scales : sequence of float
        Size of the body within each layer over the whole, from outside inwards, falling.

    Raises
    ------
    ValueError
        If a part of the surface is hidden from the centre, so that they would cross.
    """
    first = host.corners[host.triangles[:, 0]]
    if np.sum(host.area_vectors * first, axis=1).min() <= 0.0:
        raise ValueError(
            "layers of this shape would cross: parts of the surface are hidden from the centre"
        )
    inner = [
        Interface(host.moved(np.zeros(3), s), number + 1, number) for number, s in enumerate(scales)
    ]
    return Solid((Interface(host), *inner))


def coated_evenly(host: Mesh, thicknesses: Sequence[float]) -> Solid:
    """A body with layers of constant thickness, from outside inwards.

    Convex bodies of flat faces are shrunk plane by plane, smooth ones along their normals.

    Parameters
    ----------
    host : Mesh
        Convex, about its centroid, with the volume 4 pi / 3.
    thicknesses : sequence of float
        In equal-volume radii.

    Raises
    ------
    ValueError
        If the body is not convex, or too thin for its layers.
    """
    from scatterloom.solids.shrinking import shrunk

    faces, depth = [Interface(host)], 0.0
    for number, thickness in enumerate(thicknesses):
        depth += thickness
        faces.append(Interface(shrunk(host, depth), number + 1, number))
    return Solid(tuple(faces))


def _text(centre: Floats) -> str:
    return "[" + ", ".join(f"{c:g}" for c in centre) + "]"
