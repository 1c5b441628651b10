"""Material moved between neighbouring cells, so that faces along the lattice lie where they are.

Dipoles sit at the centres of their cells, the material of a cut cell does not: a face that
fills a fraction f of its cells displaces the first moment of the material by f (1 - f)/2 per
area. Besides, a sum over the centres of full cells errs like the midpoint rule. For a
smooth function g and the spacing d,

    integral of g over the body - sum of volume times g at the cell centres
      = d^2 [sum of first moments . grad g + (1/24) integral of dg/dn over the surface] + ...

On a curved or oblique surface f takes all values and the bracket averages to one constant,
which the extrapolation over lattices removes. On a face along the lattice f is the same
everywhere and another on every lattice, which spoils it: for a brick or a hexagonal plate by
ten times the error left otherwise (measured). There the bracket is made zero: each cell at
the face passes as much of its material as this takes to the neighbour on the inner side.
The whole volume is conserved. Cells that an oblique face cuts are left as they are: material
moved there would undo the calibration of `boundary_shift` (measured on turned cubes).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.bodies import Surface
from scatterloom.particle.lattice import Lattice


@dataclass(frozen=True, eq=False)
class Exchange:
    """Material passed on along one axis.

    Attributes
    ----------
    surface : Surface
        What is moved is the material on its inside in place of that outside.
    giver, taker : int64 (n,)
        Cells of the lattice.
    amount : float64 (n,)
        In cells; negative where it is taken.
    dyad : float64 (n, 3, 3)
        Mean of n n over the surface in the giver.
    """

    surface: Surface
    giver: NDArray[np.int64]
    taker: NDArray[np.int64]
    amount: NDArray[np.float64]
    dyad: NDArray[np.float64]


_SMALLEST_FACET = 1e-9
"""Facets smaller than this, in cells' faces, are rounding and make no cell oblique."""


def exchanges(lattice: Lattice) -> Iterator[Exchange]:
    """Exchanges of every region and axis; none where first moments are not known."""
    composition = lattice.composition
    if composition is None:
        return
    number = np.full(lattice.box, -1, dtype=np.int64)
    number[tuple(lattice.cell.T)] = np.arange(len(lattice.cell))
    cells = len(lattice.cell)
    for surface, moment in zip(composition.regions, composition.moment, strict=True):
        vector = surface.vector
        size = np.linalg.norm(vector, axis=1)
        oblique = np.zeros(cells, dtype=bool)
        slanted = (np.abs(vector).max(axis=1) < (1.0 - 1e-9) * size) & (size > _SMALLEST_FACET)
        oblique[surface.cell[slanted]] = True
        area = np.where(oblique[:, None], 0.0, surface.added(cells))
        unit = vector / np.where(size > 0.0, size, 1.0)[:, None]
        dyad = np.zeros((cells, 3, 3))
        np.add.at(dyad, surface.cell, size[:, None, None] * unit[:, :, None] * unit[:, None, :])
        total = np.bincount(surface.cell, size, minlength=cells)
        needed = moment + area / 24.0
        for axis in range(3):
            # Faces that look in opposite directions leave no inner side.
            giver = np.flatnonzero(np.abs(area[:, axis]) > 1e-9)
            inwards = -np.sign(area[giver, axis]).astype(np.int64)
            place = lattice.cell[giver].astype(np.int64)
            place[:, axis] += inwards
            held = (place[:, axis] >= 0) & (place[:, axis] < lattice.box[axis])
            taker = np.full(giver.size, -1)
            taker[held] = number[tuple(place[held].T)]
            held = taker >= 0
            giver, taker, inwards = giver[held], taker[held], inwards[held]
            yield Exchange(
                surface=surface,
                giver=giver,
                taker=taker,
                amount=inwards * needed[giver, axis],
                dyad=dyad[giver] / total[giver, None, None],
            )
