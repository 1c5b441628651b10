"""Clusters of spheres as surfaces: apart or touching, with necks, with a coating."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree

from scatterloom.solids.globe import FINE, sphere_mesh
from scatterloom.solids.implicit import implicit_mesh
from scatterloom.solids.joining import joined
from scatterloom.solids.mesh import Interface, Mesh, Solid, Symmetry

Floats = NDArray[np.float64]

_TOUCHING = 1e-6
"""Gap over the radius below which spheres touch."""


def spheres_mesh(centres: Floats, radii: Floats) -> Mesh:
    """Spheres that do not overlap, each a closed surface and a piece of its own.

    Touching spheres touch in a point; a corner may reach into the neighbour by 1e-4 of a
    radius at most. The triangles have sides of a cell where 64 cells lie across the cluster.

    Raises
    ------
    ValueError
        If two overlap.
    """
    for i, j in KDTree(centres).query_pairs(2.0 * radii.max()):
        gap = float(np.linalg.norm(centres[i] - centres[j])) - radii[i] - radii[j]
        if gap < -_TOUCHING * min(radii[i], radii[j]):
            raise ValueError(f"spheres {i + 1} and {j + 1} overlap by {-gap:.3g}")
    reach = float((np.linalg.norm(centres - centres.mean(axis=0), axis=1) + radii).max())
    parts = [math.ceil(FINE * math.sqrt(radius / reach)) for radius in radii]
    return joined(
        [
            sphere_mesh(c, r, 2 * ((p + 1) // 2))
            for c, r, p in zip(centres, radii, parts, strict=True)
        ]
    )


class Necked:
    """Touching spheres of radius 1 joined by necks: what a ball cannot enter between them.

    A ball of the radius q rolled around a contact touches both spheres and leaves a neck of the
    radius b: (1 + q)^2 = 1 + (b + q)^2.

    Parameters
    ----------
    centres : float64 (n, 3)
    neck : float
        Radius b of the necks over that of the spheres, 0 for none.
    """

    def __init__(self, centres: Floats, neck: float) -> None:
        self.centres, self.neck = centres, neck
        self.tree = KDTree(centres)
        pairs = sorted(self.tree.query_pairs(2.0 + _TOUCHING)) if neck else []
        self.pairs = np.array(pairs, dtype=int).reshape(-1, 2)
        self.ball = neck**2 / (2.0 * (1.0 - neck))

    def distance(self, points: Floats) -> Floats:
        """Distance from the surface outside, negative inside, float64 (n,)."""
        out = self.tree.query(points)[0] - 1.0
        ring, q = self.neck + self.ball, self.ball
        close = np.flatnonzero(out < ring)
        for i, j in self.pairs:
            middle = 0.5 * (self.centres[i] + self.centres[j])
            axis = 0.5 * (self.centres[j] - self.centres[i])
            near = close[np.linalg.norm(points[close] - middle, axis=1) < ring]
            along = (points[near] - middle) @ axis
            across = np.linalg.norm(points[near] - middle - along[:, None] * axis, axis=1)
            along = np.abs(along)
            # within the triangle of the centre of a sphere, the contact, and the ball's centre
            within = across < ring * (1.0 - along)
            near, along, across = near[within], along[within], across[within]
            out[near] = np.minimum(out[near], q - np.hypot(across - ring, along))
        return out

    def mesh(self, thickness: float = 0.0) -> Mesh:
        """Surface, or the one at this distance around it."""
        margin = 1.0 + thickness
        low, high = self.centres.min(axis=0) - margin, self.centres.max(axis=0) + margin
        return implicit_mesh(lambda points: self.distance(points) - thickness, low, high)


def neck_volume(neck: float) -> float:
    """Volume of one neck between spheres of radius 1, by Pappus and the integral of the outline.

    The solid between the planes where the ball touches, less the two caps of the spheres.
    """
    q = neck**2 / (2.0 * (1.0 - neck))
    ring = neck + q
    s = q / (1.0 + q)  # height above the contact where the ball touches
    # pi times the integral of (ring - sqrt(q^2 - u^2))^2 over |u| < s
    area = 0.5 * (s * math.sqrt(q * q - s * s) + q * q * math.asin(s / q))
    whole = 2.0 * math.pi * (ring**2 * s - 2.0 * ring * area + q * q * s - s**3 / 3.0)
    return whole - 2.0 * math.pi * s**2 * (3.0 - s) / 3.0


def cluster_solid(centres: Floats, neck: float = 0.0, coating: float = 0.0) -> Solid:
    """Spheres of radius 1, perhaps with necks and with a coating.

    Parameters
    ----------
    centres : float64 (n, 3)
        Of spheres that do not overlap.
    neck : float
        Radius of the necks at contacts, 0 for none.
    coating : float
        Thickness of a coating of material 0 around everything, of material 1 then; 0 for none.
    """
    shape = Necked(centres, neck)
    inner = shape.mesh() if neck else spheres_mesh(centres, np.ones(len(centres)))
    if not coating:
        return Solid((Interface(inner),), _row(centres))
    return Solid((Interface(shape.mesh(coating)), Interface(inner, 1, 0)), _row(centres))


def _row(centres: Floats) -> Symmetry | None:
    """``axial`` for equal spheres along z that are their own mirror image about the origin."""
    straight = np.abs(centres[:, :2]).max() == 0.0
    heights = np.sort(centres[:, 2])
    return "axial" if straight and np.allclose(heights, -heights[::-1], atol=1e-12) else None
