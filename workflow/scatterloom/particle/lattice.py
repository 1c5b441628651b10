"""Cubic lattice of an ellipsoidal particle: fill fraction and surface normal of every cell."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.overlap import octant_overlap
from scatterloom.particle.shapes import Shape

SMALLEST_FILL = 1e-9
"""Cells emptier than this are left out; all of them together weigh less than 1e-9."""


# Compared and hashed by identity: it holds arrays.
@dataclass(frozen=True, eq=False)
class Lattice:
    """Cells of a particle on a cubic lattice; lengths in units of the equal-volume-sphere radius.

    Attributes
    ----------
    box : tuple of 3 int
        Cells of the surrounding box along x, y, z, all even; the centre of the
        particle is the centre of the box and thus a corner shared by eight cells.
    spacing : float
        Edge of a cell.
    cell : int32 (n_cell, 3)
        Indices in the box of every cell of the particle, in C order.
    fill : float64 (n_cell,)
        Volume fraction of the cell inside the particle, in (0, 1].
    normal : float64 (n_cell, 3)
        Unit outward normal, averaged over the surface inside the cell; 0 in full cells.
    area : float64 (n_cell,)
        Area of the surface inside the cell, projected along its mean normal, in units of
        a face of the cell; 0 in full cells.
    mirrors : tuple of 3 bool
        Whether x, y, z -> -x, -y, -z map the lattice onto itself.
    symmetry : str
        Symmetry of the shape: ``sphere``, ``axial`` or ``mirrors``.
    cells_across : int
        Cells spanned by the longest axis of the particle.
    """

    box: tuple[int, int, int]
    spacing: float
    cell: NDArray[np.int32]
    fill: NDArray[np.float64]
    normal: NDArray[np.float64]
    area: NDArray[np.float64]
    mirrors: tuple[bool, bool, bool]
    symmetry: str
    cells_across: int

    def centre(self) -> NDArray[np.float64]:
        """Positions of the cell centres, float64 (n_cell, 3), from the particle's centre."""
        return (self.cell + 0.5 - np.array(self.box) / 2) * self.spacing


def lattice(shape: Shape, cells_across: int) -> Lattice:
    """Lattice of a shape whose longest axis spans exactly `cells_across` cells.

    Fill fractions are exact to about 1e-12 of a cell and the volume of the cells
    adds up to the particle's. The normal of a cut cell is the integral of the
    normal over the surface inside it, normalized; the divergence theorem gives it
    from the areas of the cell's faces inside the particle.

    Parameters
    ----------
    shape : Shape
    cells_across : int
        Cells along the longest axis, 1 or more; an odd number leaves half a cell
        between the end of that axis and the box.

    Returns
    -------
    Lattice

    Raises
    ------
    ValueError
        If `cells_across` is below 1.

    Examples
    --------
    >>> from scatterloom.particle.shapes import from_spec
    >>> ball = lattice(from_spec({"kind": "sphere"}), 4)
    >>> ball.box, ball.cell.shape, ball.spacing
    ((4, 4, 4), (56, 3), 0.5)
    """
    if cells_across < 1:
        raise ValueError(f"cells_across must be 1 or more, found {cells_across}")
    half_axes = shape.half_axes
    spacing = 2.0 * shape.circumscribed_radius / cells_across
    # Rounding must not open a layer of cells for an axis that ends on a face.
    nx, ny, nz = (math.ceil(half / spacing - 1e-9) for half in half_axes)
    fill, area = octant_overlap(spacing / half_axes, (nx, ny, nz))
    fill = np.where(fill > SMALLEST_FILL, fill, 0.0)
    cut = (fill > 0.0) & (fill < 1.0)
    normal = np.zeros_like(area)
    length = np.where(cut, np.linalg.norm(area, axis=-1), 0.0)
    normal[cut] = area[cut] / length[cut][:, None]
    # One octant reflected: the mirror symmetry is exact to the last bit.
    for axis in range(3):
        mirrored = np.flip(normal, axis).copy()
        mirrored[..., axis] *= -1.0
        normal = np.concatenate((mirrored, normal), axis)
        fill = np.concatenate((np.flip(fill, axis), fill), axis)
        length = np.concatenate((np.flip(length, axis), length), axis)
    inside = fill > 0.0
    return Lattice(
        box=(2 * nx, 2 * ny, 2 * nz),
        spacing=spacing,
        cell=np.argwhere(inside).astype(np.int32),
        fill=fill[inside],
        normal=normal[inside] + 0.0,  # no negative zeros
        area=length[inside],
        mirrors=(True, True, True),
        symmetry=shape.symmetry,
        cells_across=cells_across,
    )
