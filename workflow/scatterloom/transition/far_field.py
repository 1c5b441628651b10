"""Far field of the dipoles of a lattice particle, summed cell by cell."""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray


@njit(cache=True, parallel=True)
def _sums(points, dipoles, signs, parity, directions, out):  # type: ignore[no-untyped-def]
    """Sums of p exp(-i n r) over all images of the fundamental cells, (n_direction, 3)."""
    n_class, _, n_cell = dipoles.shape
    for d in prange(len(directions)):
        kx, ky, kz = directions[d, 0], directions[d, 1], directions[d, 2]
        total = np.zeros(3, dtype=np.complex128)
        phase = np.empty(n_class, dtype=np.complex128)
        for o in range(n_cell):
            x, y, z = kx * points[o, 0], ky * points[o, 1], kz * points[o, 2]
            for s in range(n_class):
                angle = signs[s, 0] * x + signs[s, 1] * y + signs[s, 2] * z
                phase[s] = complex(np.cos(angle), -np.sin(angle))
            for q in range(3):
                part = 0.0j
                for c in range(n_class):
                    value = dipoles[c, q, o]
                    if value == 0.0:
                        continue
                    seen = 0.0j
                    for s in range(n_class):
                        seen += parity[c, s] * signs[s, q] * phase[s]
                    part += seen * value
                total[q] += part
        out[d] = total


def dipole_sums(
    points: NDArray[np.float64],
    dipoles: NDArray,
    signs: NDArray[np.float64],
    directions: NDArray[np.float64],
) -> NDArray[np.complex128]:
    """Sum of dipole moments with the phases they have in each direction.

    Parameters
    ----------
    points : float64 (n_cell, 3) [1/k]
        Centres of the fundamental cells.
    dipoles : complex (n_class, 3, n_cell)
        Parts of the dipole moments in every parity class.
    signs : float64 (n_class, 3)
        Of the coordinates at every image (`waves.parity.images`).
    directions : float64 (n_direction, 3)
        Unit vectors.

    Returns
    -------
    complex128 (n_direction, 3)
        ``sum p exp(-i n r)`` over all cells.
    """
    n_class = len(signs)
    parity = np.array(
        [[-1.0 if (c & s).bit_count() % 2 else 1.0 for s in range(n_class)] for c in range(n_class)]
    )
    out = np.empty((len(directions), 3), dtype=np.complex128)
    _sums(points, dipoles, signs, parity, np.ascontiguousarray(directions), out)
    return out
