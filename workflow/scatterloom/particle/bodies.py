"""Cells cut by one convex body, whatever its shape and its place on the lattice."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.ball import ball_overlap
from scatterloom.particle.clipping import polyhedron_overlap
from scatterloom.particle.overlap import FULL, octant_overlap
from scatterloom.particle.polyhedron import Polyhedron
from scatterloom.particle.shapes import Ellipsoid, Faceted, Shape

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Placement:
    """Where a particle lies on its lattice.

    Attributes
    ----------
    spacing : float
        Edge of a cell in units of the equal-volume-sphere radius.
    rotation : float64 (3, 3)
        Turns a vector of the particle frame into the lattice frame.
    origin : float64 (3,)
        Centre of the particle, in cells from the lowest corner of the box.
    box : tuple of 3 int
        Cells along each axis.
    """

    spacing: float
    rotation: Floats
    origin: Floats
    box: tuple[int, int, int]

    @property
    def centred(self) -> bool:
        """Whether the axes agree and the particle's centre is a corner in the box's middle."""
        turned = not np.array_equal(self.rotation, np.eye(3))
        even = all(n % 2 == 0 for n in self.box)
        return even and not turned and bool(np.all(2.0 * self.origin == self.box))


@dataclass(frozen=True, eq=False)
class Cut:
    """A body on its lattice.

    Attributes
    ----------
    fill : float64 box
        Volume fraction inside the body.
    surfaces : list of float64 box + (3,)
        For each smooth piece of the surface, its area vector (outward mean normal times
        area) inside every cell, in units of a cell's face. A face of a polyhedron that lies on
        faces of cells belongs to the full cells on its inner side.
    moment : float64 box + (3,) or None
        Integral over the body's part of each cell of the position from the cell's centre,
        in cells; known for polyhedra only.
    """

    fill: Floats
    surfaces: list[Floats]
    moment: Floats | None = None


def cut(shape: Shape, scale: float, placement: Placement) -> Cut:
    """Cells of the shape, made smaller by `scale` about its centre."""
    if isinstance(shape, Ellipsoid):
        return _ellipsoid(shape.half_axes * scale, placement)
    if isinstance(shape, Faceted):
        corners = shape.body.corners @ placement.rotation.T
        body = Polyhedron(corners * (scale / placement.spacing), shape.body.faces)
        return _polyhedron(body, placement)
    raise TypeError(f"no cells are known for {type(shape).__name__}")


def _ellipsoid(half_axes: Floats, placement: Placement) -> Cut:
    if placement.centred:
        nx, ny, nz = (n // 2 for n in placement.box)
        fill, area = octant_overlap(placement.spacing / half_axes, (nx, ny, nz))
        # One octant reflected: the mirror symmetry is exact to the last bit.
        for axis in range(3):
            image = np.flip(area, axis).copy()
            image[..., axis] *= -1.0
            area = np.concatenate((image, area), axis)
            fill = np.concatenate((np.flip(fill, axis), fill), axis)
        return Cut(fill, [area])
    edges = placement.spacing * placement.rotation / half_axes
    fill, area = ball_overlap(edges, placement.origin, placement.box)
    return Cut(fill, [area])


def _polyhedron(body: Polyhedron, placement: Placement) -> Cut:
    normals, _ = body.planes
    fill, facet, moment = polyhedron_overlap(body, placement.origin, placement.box)
    fill[fill >= FULL] = 1.0
    return Cut(fill, [a[..., None] * n for a, n in zip(facet, normals, strict=True)], moment)
