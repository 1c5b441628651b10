"""Any field on the cells of a lattice particle, taken apart into its parity classes."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice

_EMPTY = 1e-7
"""A class whose part of a field is smaller than this, relative to all, is rounding."""


def images(lattice: Lattice, matrix: LatticeMatrix) -> NDArray[np.float64]:
    """Signs of the coordinates at every image of a fundamental cell, (n_class, 3).

    Bit a of the number of an image is set if it lies beyond the a-th mirror plane.
    """
    mirrored = [a for a in range(3) if lattice.mirrors[a]]
    signs = np.ones((matrix.n_class, 3))
    for s in range(matrix.n_class):
        for bit, a in enumerate(mirrored):
            if s >> bit & 1:
                signs[s, a] = -1.0
    return signs


def parity_parts(
    field: Callable[[NDArray[np.float64]], NDArray[np.complex128]],
    points: NDArray[np.float64],
    signs: NDArray[np.float64],
    dtype: type = np.complex64,
) -> NDArray:
    """Parts of a field in every parity class, on the fundamental cells.

    Parameters
    ----------
    field : callable(points) -> complex128 (3, n_cell)
        Components at points float64 (n_cell, 3).
    points : float64 (n_cell, 3)
        Centres of the fundamental cells.
    signs : float64 (n_class, 3)
        Of the coordinates at every image (`images`).
    dtype : complex64 (default) or complex128

    Returns
    -------
    complex (n_class, 3, n_cell)
        Their sum, with the signs they have at an image, is the field there. Parts that
        vanish but for rounding are zero.
    """
    n_class = len(signs)
    out: NDArray = np.zeros((n_class, 3, len(points)), dtype=dtype)
    for s in range(n_class):
        value = field(points * signs[s]) * signs[s][:, None]
        for c in range(n_class):
            sign = -1.0 if (c & s).bit_count() % 2 else 1.0
            out[c] += (sign / n_class) * value
    strength = np.linalg.norm(out.reshape(n_class, -1), axis=1)
    out[strength < _EMPTY * np.linalg.norm(strength)] = 0.0
    return out
