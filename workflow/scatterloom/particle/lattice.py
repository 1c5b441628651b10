"""Cubic lattice of a particle: what every cell is made of, and the surfaces in it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.bodies import Placement, Surface, cut
from scatterloom.particle.shapes import Ellipsoid, Shape
from scatterloom.solids.mesh import MEDIUM

Floats = NDArray[np.float64]

SMALLEST_FILL = 1e-9
"""Cells emptier than this are left out; all of them together weigh less than 1e-9."""


@dataclass(frozen=True, eq=False)
class Composition:
    """Materials and interfaces of a particle that one fill and one normal a cell cannot describe.

    Attributes
    ----------
    fraction : float64 (n_material, n_cell)
        Volume fraction of each material in every cell; the rest is medium.
    surfaces : tuple of Surface
        What lies between each pair of materials; their cells are those of the lattice.
    regions : tuple of Surface
        Closed surfaces whose insides make up the particle; none where first moments are not made
        use of.
    moment : float64 (n_region, n_cell, 3)
        Integral of the position from the cell's centre over the part of the cell that
        each region encloses [cells].
    """

    fraction: Floats
    surfaces: tuple[Surface, ...]
    regions: tuple[Surface, ...] = ()
    moment: Floats = field(default_factory=lambda: np.zeros((0, 0, 3)))


# Compared and hashed by identity: it holds arrays.
@dataclass(frozen=True, eq=False)
class Lattice:
    """Cells of a particle on a cubic lattice; lengths in units of the equal-volume-sphere radius.

    Everything is described along the axes of the lattice, which `rotation` relates to
    those of the particle.

    Attributes
    ----------
    box : tuple of 3 int
        Cells of the surrounding box along x, y, z; along an axis with a mirror plane
        the number is even and the particle's centre is the centre of the box.
    spacing : float
        Edge of a cell.
    cell : int32 (n_cell, 3)
        Indices in the box of every cell of the particle, in C order.
    fill : float64 (n_cell,)
        Volume fraction of the cell inside the particle, in (0, 1].
    normal : float64 (n_cell, 3)
        Unit outward normal, averaged over the outer surface inside the cell; 0 in full
        cells, and where faces that look in opposite directions cancel.
    area : float64 (n_cell,)
        Area of the outer surface inside the cell, projected along its mean normal, in units
        of a face of the cell; 0 in full cells.
    mirrors : tuple of 3 bool
        Whether x, y, z -> -x, -y, -z map the lattice onto itself.
    symmetry : str
        Symmetry of the shape in its own frame: ``sphere``, ``axial``, ``mirrors``, ``none``.
    cells_across : int
        Cells spanned by the longest extent of the particle along its own axes.
    composition : Composition or None
        None for an ellipsoid of one material, which `fill`, `normal` and `area` describe
        completely.
    rotation : float64 (3, 3) or None
        Turns a vector of the particle frame into the lattice frame; None if they agree.
    origin : tuple of 3 float or None
        Centre of the particle in cells from the lowest corner of the box; None for the
        centre of the box.
    """

    box: tuple[int, int, int]
    spacing: float
    cell: NDArray[np.int32]
    fill: Floats
    normal: Floats
    area: Floats
    mirrors: tuple[bool, bool, bool]
    symmetry: str
    cells_across: int
    composition: Composition | None = None
    rotation: Floats | None = None
    origin: tuple[float, float, float] | None = None

    def centre(self) -> Floats:
        """Positions of the cell centres from the particle's centre, along the lattice axes.

        float64 (n_cell, 3)
        """
        origin = np.array(self.box) / 2 if self.origin is None else np.array(self.origin)
        return (self.cell + 0.5 - origin) * self.spacing

    @property
    def fraction(self) -> Floats:
        """Volume fraction of each material in every cell, float64 (n_material, n_cell)."""
        return self.fill[None] if self.composition is None else self.composition.fraction

    @property
    def interfaces(self) -> tuple[tuple[int, int], ...]:
        """Materials inside and outside of each smooth piece of surface, -1 for the medium."""
        if self.composition is None:
            return ((0, MEDIUM),)
        surfaces = self.composition.surfaces
        return tuple((s.inside, s.outside) for s in surfaces for _ in range(s.pieces))

    @property
    def contacts(self) -> tuple[tuple[int, int], ...]:
        """Pairs of materials (inside, outside) that touch, -1 for the medium."""
        return tuple(dict.fromkeys(self.interfaces))

    @property
    def area_vector(self) -> Floats:
        """Outward mean normal times area of each piece, float64 (n_piece, n_cell, 3).

        The whole table, for a look at particles of few pieces.
        """
        if self.composition is None:
            return (self.normal * self.area[:, None])[None]
        out = [np.zeros((0, len(self.cell), 3))]
        for surface in self.composition.surfaces:
            table = np.zeros((surface.pieces, len(self.cell), 3))
            table[surface.piece, surface.cell] = surface.vector
            out.append(table)
        return np.concatenate(out)


def lattice(
    shape: Shape,
    cells_across: int,
    rotation: NDArray[np.float64] | None = None,
    offset: Sequence[float] | None = None,
) -> Lattice:
    """Lattice of a shape whose longest extent spans exactly `cells_across` cells.

    Fill fractions are exact to about 1e-12 of a cell and the volume of the cells
    adds up to the particle's. The area vector of a surface in a cut cell is the integral of
    the normal over it; for a curved surface the divergence theorem gives it from the areas
    of the cell's faces inside the body, for a polyhedron each face is clipped.

    Parameters
    ----------
    shape : Shape
    cells_across : int
        Cells along the longest extent in the particle's own frame, 1 or more; an odd
        number leaves half a cell between its end and the box.
    rotation : float64 (3, 3), optional
        Turns vectors of the particle frame into the frame of the lattice; the lattice's axes
        are the particle's if missing.
    offset : sequence of 3 float, optional
        Place of the particle's centre past a corner of the lattice, in cells.

    Returns
    -------
    Lattice

    Raises
    ------
    ValueError
        If `cells_across` is below 1 or `rotation` is not a rotation.

    Examples
    --------
    >>> from scatterloom.particle.shapes import from_spec
    >>> ball = lattice(from_spec({"kind": "sphere"}), 4)
    >>> ball.box, ball.cell.shape, ball.spacing
    ((4, 4, 4), (56, 3), 0.5)
    """
    if cells_across < 1:
        raise ValueError(f"cells_across must be 1 or more, found {cells_across}")
    turn = np.eye(3) if rotation is None else np.asarray(rotation, dtype=np.float64)
    if turn.shape != (3, 3) or np.abs(turn @ turn.T - np.eye(3)).max() > 1e-12:
        raise ValueError("rotation must be an orthogonal 3 x 3 matrix")
    if np.linalg.det(turn) < 0.0:
        raise ValueError("rotation must not be a reflection")
    place, mirrors = _place(shape, cells_across, turn, offset)
    parts = cut(shape, place)
    inside = parts.fill > SMALLEST_FILL
    fill = parts.fill[inside]
    number = np.full(inside.size, -1, dtype=np.int64)
    number[inside.ravel()] = np.arange(fill.size)
    surfaces = tuple(surface.within(number) for surface in parts.surfaces)
    outer = sum(s.added(fill.size) for s in surfaces if s.outside == MEDIUM)
    outer = np.where((fill < 1.0)[:, None], outer, 0.0)
    area = np.linalg.norm(outer, axis=-1)
    # Faces that cancel leave rounding errors, which have no direction.
    area[area < 1e-12] = 0.0
    normal = outer / np.where(area > 0.0, area, 1.0)[:, None]
    normal[area == 0.0] = 0.0
    composition = None
    if shape.core_radius_fraction is not None or not isinstance(shape, Ellipsoid):
        regions = surfaces
        if parts.regions is not parts.surfaces:
            regions = tuple(region.within(number) for region in parts.regions)
        composition = Composition(
            parts.fraction[:, inside], surfaces, regions, parts.moment[:, inside]
        )
    nx, ny, nz = place.box
    ox, oy, oz = (float(o) for o in place.origin)
    return Lattice(
        box=(nx, ny, nz),
        spacing=place.spacing,
        cell=np.argwhere(inside).astype(np.int32),
        fill=fill,
        normal=normal + 0.0,  # no negative zeros
        area=area,
        mirrors=mirrors,
        symmetry=shape.symmetry,
        cells_across=cells_across,
        composition=composition,
        rotation=None if rotation is None else turn,
        origin=None if place.centred else (ox, oy, oz),
    )


def _place(
    shape: Shape, cells_across: int, turn: Floats, offset: Sequence[float] | None
) -> tuple[Placement, tuple[bool, bool, bool]]:
    """Box around the particle, and the mirror planes that lattice and particle share."""
    spacing = 2.0 * float(shape.half_extents.max()) / cells_across
    shift = np.zeros(3) if offset is None else np.asarray(offset, dtype=np.float64) % 1.0
    low, high = shape.bounds(turn) / spacing
    # Rounding must not open a layer of cells for an axis that ends on a face.
    first = np.array([math.floor(x + 1e-9) for x in shift + low])
    last = np.array([math.ceil(x - 1e-9) for x in shift + high])
    mirrors = [
        bool(s == 0.0) and shape.is_mirrored(axis) for s, axis in zip(shift, turn, strict=True)
    ]
    for axis in np.flatnonzero(mirrors):
        last[axis] = max(last[axis], -first[axis])
        first[axis] = -last[axis]
    nx, ny, nz = (int(n) for n in last - first)
    box = (nx, ny, nz)
    return Placement(spacing, turn, shift - first, box), (mirrors[0], mirrors[1], mirrors[2])
