"""Far field of the dipoles of a lattice particle, summed cell by cell."""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice


@njit(cache=True, parallel=True)
def _sums(cell, dipoles, mirrored, steps, first, directions, out):  # type: ignore[no-untyped-def]
    """Sums of p exp(-i n r) over all images of the fundamental cells, (n_direction, 3)."""
    n_class, _, n_cell = dipoles.shape
    longest = cell.max() + 1
    bit = np.zeros(3, dtype=np.int64)
    bits = 0
    for a in range(3):
        bit[a] = bits
        bits += mirrored[a]
    used = np.zeros(n_class, dtype=np.bool_)
    for c in range(n_class):
        used[c] = np.any(dipoles[c] != 0)
    for d in prange(len(directions)):
        # Both parities along each axis, for every layer of cells.
        factor = np.empty((3, 2, longest), dtype=np.complex128)
        for a in range(3):
            for i in range(longest):
                angle = directions[d, a] * (first[a] + steps * i)
                if mirrored[a]:
                    factor[a, 0, i] = 2.0 * np.cos(angle)
                    factor[a, 1, i] = -2.0j * np.sin(angle)
                else:
                    factor[a, 0, i] = complex(np.cos(angle), -np.sin(angle))
                    factor[a, 1, i] = factor[a, 0, i]
        for c in range(n_class):
            if not used[c]:
                continue
            for q in range(3):
                odd = np.zeros(3, dtype=np.int64)
                for a in range(3):
                    # Even classes have an odd component across the mirror plane.
                    odd[a] = mirrored[a] * ((c >> bit[a] & 1) ^ (a == q))
                fx, fy, fz = factor[0, odd[0]], factor[1, odd[1]], factor[2, odd[2]]
                total = 0.0j
                for o in range(n_cell):
                    value = np.complex128(dipoles[c, q, o])
                    total += value * (fx[cell[o, 0]] * fy[cell[o, 1]] * fz[cell[o, 2]])
                out[d, q] += total


def dipole_sums(
    lattice: Lattice,
    matrix: LatticeMatrix,
    dipoles: NDArray,
    directions: NDArray[np.float64],
) -> NDArray[np.complex128]:
    """Sum of dipole moments with the phases they have in each direction.

    Parameters
    ----------
    lattice : Lattice
    matrix : LatticeMatrix
        Of the lattice.
    dipoles : complex (n_class, 3, n_cell)
        Parts of the dipole moments in every parity class, on the fundamental cells.
    directions : float64 (n_direction, 3)
        Unit vectors.

    Returns
    -------
    complex128 (n_direction, 3)
        ``sum p exp(-i n r)`` over all cells.
    """
    cell = lattice.cell[matrix.fundamental].astype(np.int32)
    origin = np.array(lattice.box) / 2 if lattice.origin is None else np.array(lattice.origin)
    low = np.where(lattice.mirrors, np.array(lattice.box) // 2, 0)
    first = (low + 0.5 - origin) * matrix.kd
    out = np.zeros((len(directions), 3), dtype=np.complex128)
    mirrored = np.array(lattice.mirrors, dtype=np.int64)
    at = np.ascontiguousarray(directions, dtype=np.float64)
    _sums(cell - low.astype(np.int32), dipoles, mirrored, matrix.kd, first, at, out)
    return out
