"""The textbook way to solve a lattice particle, written independently of the package.

A staircase of point dipoles (Purcell & Pennypacker 1973; lattice dispersion relation of Draine
& Goodman 1993), the whole doubled grid transformed in double precision for every product,
one plane wave at a time by stabilized bi-conjugate gradients (van der Vorst 1992).
Lengths are in units of 1/k, Gaussian units, time factor exp(-i w t).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import scipy.fft
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator, bicgstab

# Coefficients of the lattice dispersion relation (Draine & Goodman 1993, Astrophys. J. 405).
_B1, _B2, _B3 = -1.8915316, 0.1648469, -1.7700004


def staircase(
    half_extents: NDArray[np.float64],
    cells_across: int,
    inside: Callable[[NDArray[np.float64]], NDArray[np.bool_]] | None = None,
) -> tuple[NDArray, float]:
    """Cells whose centre is inside a particle, and the spacing that conserves its volume.

    Parameters
    ----------
    half_extents : float64 (3,)
        In units of the equal-volume radius.
    cells_across : int
        Along the longest extent.
    inside : callable((n, 3) points) -> bool (n,), optional
        Of a particle about the origin; an ellipsoid with these half axes if not given.

    Returns
    -------
    cell : int64 (n_cell, 3)
        Indices from zero in the smallest box.
    spacing : float
        In units of the equal-volume radius.
    """
    spacing = 2.0 * half_extents.max() / cells_across
    counts = [2 * int(np.ceil(a / spacing - 1e-9)) for a in half_extents]
    axes = [(np.arange(n) + 0.5 - n / 2) * spacing for n in counts]
    grid = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1)
    if inside is None:
        held = np.sum((grid / half_extents) ** 2, axis=-1) <= 1.0
    else:
        held = inside(grid.reshape(-1, 3)).reshape(counts)
    cell = np.argwhere(held)
    return cell - cell.min(axis=0), (4 * np.pi / 3 / len(cell)) ** (1 / 3)


@dataclass
class PointDipoles:
    """Point dipoles on the cells of a particle at one size.

    Parameters
    ----------
    cell : int64 (n_cell, 3)
    kd : float
        Lattice spacing times wavenumber.
    threads : int
    """

    cell: NDArray[np.int64]
    kd: float
    threads: int = 1
    products: int = 0
    _spectrum: NDArray[np.complex128] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        self.box = tuple(int(n) for n in self.cell.max(axis=0) + 1)
        self.padded = tuple(2 * n for n in self.box)
        lags = np.meshgrid(
            *(scipy.fft.fftfreq(n, 1.0 / n).round() for n in self.padded), indexing="ij"
        )
        offset = self.kd * np.stack(lags)
        distance = np.sqrt((offset**2).sum(axis=0))
        distance[0, 0, 0] = 1.0
        # Field of a unit dipole (Jackson 1999, eq. 9.18).
        wave = np.exp(1j * distance) / distance
        near = (1.0 - 1j * distance) / distance**2
        iso, rad = wave * (1.0 - near), wave * (3.0 * near - 1.0) / distance**2
        kernel = np.empty((6, *self.padded), dtype=complex)
        for c, (a, b) in enumerate(((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))):
            kernel[c] = rad * offset[a] * offset[b] + (iso if a == b else 0.0)
        kernel[:, 0, 0, 0] = 0.0
        self._spectrum = scipy.fft.fftn(kernel, axes=(1, 2, 3), workers=self.threads)

    def positions(self) -> NDArray[np.float64]:
        """Centres of the cells from that of the box, float64 (n_cell, 3) [1/k]."""
        return self.kd * (self.cell + 0.5 - np.array(self.box) / 2)

    def interaction(self, dipoles: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Field of all other dipoles at every cell, complex128 (3, n_cell)."""
        grid = np.zeros((3, *self.padded), dtype=complex)
        at = tuple(self.cell.T)
        grid[(slice(None), *at)] = dipoles
        p = scipy.fft.fftn(grid, axes=(1, 2, 3), workers=self.threads)
        xx, yy, zz, xy, xz, yz = self._spectrum
        grid = np.stack(
            [
                xx * p[0] + xy * p[1] + xz * p[2],
                xy * p[0] + yy * p[1] + yz * p[2],
                xz * p[0] + yz * p[1] + zz * p[2],
            ]
        )
        out = scipy.fft.ifftn(grid, axes=(1, 2, 3), workers=self.threads)
        self.products += 1
        return out[(slice(None), *at)]

    def solve(
        self,
        index: complex,
        direction: NDArray[np.float64],
        polarization: NDArray[np.float64],
        tolerance: float = 1e-5,
    ) -> NDArray[np.complex128]:
        """Dipole moments for one plane wave of unit amplitude, complex128 (3, n_cell).

        Raises
        ------
        RuntimeError
            If the relative residual does not fall below `tolerance`.
        """
        alpha = polarizability(index, self.kd, direction, polarization)
        n_cell = len(self.cell)
        incident = polarization[:, None] * np.exp(1j * (self.positions() @ direction))

        def multiply(vector: NDArray[np.complex128]) -> NDArray[np.complex128]:
            dipoles = vector.reshape(3, n_cell)
            return (dipoles - alpha * self.interaction(dipoles)).ravel()

        operator = LinearOperator((3 * n_cell, 3 * n_cell), matvec=multiply, dtype=complex)
        start = np.zeros(3 * n_cell, dtype=complex)
        solution, code = bicgstab(operator, (alpha * incident).ravel(), x0=start, rtol=tolerance)
        if code != 0:
            raise RuntimeError(f"bicgstab ended with code {code}")
        return solution.reshape(3, n_cell)

    def far_field(
        self, dipoles: NDArray[np.complex128], scattered: NDArray[np.float64]
    ) -> NDArray[np.complex128]:
        """F with E_sca = F exp(ikr)/(kr), complex128 (n_direction, 3)."""
        phase = np.exp(-1j * (scattered @ self.positions().T))
        total = phase @ dipoles.T
        return total - scattered * np.sum(total * scattered, axis=1, keepdims=True)


def polarizability(
    index: complex, kd: float, direction: NDArray[np.float64], polarization: NDArray[np.float64]
) -> complex:
    """Polarizability of a cell after the lattice dispersion relation [k^-3]."""
    eps = complex(index) ** 2
    static = kd**3 * 3.0 / (4.0 * np.pi) * (eps - 1.0) / (eps + 2.0)
    shape = float(np.sum((direction * polarization) ** 2))
    correction = (_B1 + eps * _B2 + eps * _B3 * shape) * kd**2 - 2j / 3 * kd**3
    return complex(static / (1.0 + static / kd**3 * correction))
