"""Cell polarizabilities: tensor cells at the boundary, self term of the filtered lattice."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


def self_term(kd: float) -> complex:
    """On-site term g0 of the filtered lattice, choice (a): no contact term in the kernel.

    Gay-Balmaz & Martin 2002, Comput. Phys. Commun. 144, 111, eqs. 21-24: the first
    three contributions are the filtered self field, the last one the filtered
    depolarization of the cell.
    """
    radiation = 1j + np.log((np.pi - kd) / (np.pi + kd)) / np.pi
    return (4 / 3) * kd**2 + (2 / 3) * radiation * kd**3 - (4 * np.pi / 3) * (np.pi / 6)


@dataclass(frozen=True)
class CellTensors:
    """Square root of the polarizability of every cell, and its absorption.

    Attributes
    ----------
    root : complex128 (n_cell, 6) [k^-3/2]
        Symmetric square root of the polarizability tensor: xx, yy, zz, xy, xz, yz.
    loss : float64 (n_cell, 6)
        Absorption tensor L such that the absorption cross section of the solution x
        is ``4 pi sum x^H L x / |E0|^2`` [k^-2].
    arithmetic : bool
        True if a negative real permittivity forced the arithmetic mean everywhere.
    """

    root: NDArray[np.complex128]
    loss: NDArray[np.float64]
    arithmetic: bool


def _assemble(across: NDArray, along: NDArray, normal: NDArray) -> NDArray:
    """Tensor `across` (I - nn) + `along` nn as six components."""
    difference = along - across
    n = normal
    out = np.empty((across.size, 6), dtype=across.dtype)
    for c in range(3):
        out[:, c] = across + difference * n[:, c] ** 2
    out[:, 3] = difference * n[:, 0] * n[:, 1]
    out[:, 4] = difference * n[:, 0] * n[:, 2]
    out[:, 5] = difference * n[:, 1] * n[:, 2]
    return out


ALONG_SHIFT, ACROSS_SHIFT = -0.0613, -0.00115
"""Shift of the interface in cells, per contrast (see `boundary_shift`)."""


def boundary_shift(
    normal: NDArray[np.float64], permittivity: complex
) -> tuple[NDArray[np.complex128], complex]:
    """Outward shift of the interface that cancels the linear error of the cut cells.

    With tensor means alone a particle on the lattice behaves as if its surface lay a few
    thousandths of a cell further in or out, which leaves an error linear in the
    spacing. A shift h of the interface changes the static energy by
    h [(eps - 1) |E_across|^2 + (1 - 1/eps) |D_along|^2] per area (Johnson et al. 2002,
    Phys. Rev. E 65, 066611), so the shift for either part was read off the polarizability
    of spheres and spheroids on the lattice against the closed form for ellipsoids: it is
    proportional to the Clausius-Mossotti contrast, and along the normal it vanishes for
    interfaces parallel to the lattice planes. Measured with |m| from 1.2 to 2.3, absorbing
    and not, this takes away nine tenths of the linear error.

    Parameters
    ----------
    normal : float64 (n_cell, 3)
    permittivity : complex

    Returns
    -------
    along : complex128 (n_cell,) [cells]
        For the field along the normal.
    across : complex [cells]
        For the field across it.
    """
    contrast = (permittivity - 1.0) / (permittivity + 2.0)
    oblique = 1.0 - np.sum(normal**4, axis=1)
    along = ALONG_SHIFT * contrast * oblique
    return along, ACROSS_SHIFT * (permittivity - 1.0) * contrast


def cell_tensors(
    fill: NDArray[np.float64],
    normal: NDArray[np.float64],
    index: complex,
    kd: float,
    area: NDArray[np.float64] | None = None,
) -> CellTensors:
    """Polarizability of full and cut cells of a homogeneous particle.

    The permittivity of a cut cell is the harmonic mean along the surface normal and
    the arithmetic mean across it, weighted by the fill fraction (Farjadpour et al.
    2006, Opt. Lett. 31, 2972; Kottke et al. 2008, Phys. Rev. E 77, 036611).

    Parameters
    ----------
    fill : float64 (n_cell,)
        Volume fraction of the particle in each cell, in (0, 1].
    normal : float64 (n_cell, 3)
        Unit surface normal in cut cells; zero in full cells.
    index : complex
        Refractive index relative to the medium, Im >= 0.
    kd : float
        Lattice spacing times wavenumber.
    area : float64 (n_cell,), optional
        Surface inside each cell in units of a cell's face; if given, the fill of cut cells
        is corrected by `boundary_shift`.
    """
    eps = complex(index) ** 2
    arithmetic = eps.real < 0.0
    along_fill, across_fill = fill.astype(np.complex128), fill.astype(np.complex128)
    if area is not None and not arithmetic:
        along_shift, across_shift = boundary_shift(normal, eps)
        along_fill += along_shift * area
        across_fill += across_shift * area
    mean = 1.0 + across_fill * (eps - 1.0)
    harmonic = mean if arithmetic else 1.0 / (1.0 + along_fill * (1.0 / eps - 1.0))
    volume = kd**3
    g0 = self_term(kd)

    def alpha(permittivity: NDArray) -> NDArray:
        return volume / (4 * np.pi / (permittivity - 1.0) - g0)

    def loss_of(permittivity: NDArray, polarizability: NDArray) -> NDArray:
        # Power absorbed is -Im(1/(V chi)) |P|^2, and P = alpha^1/2 x.
        inverse_chi = 4 * np.pi / (permittivity - 1.0)
        return -(inverse_chi.imag / volume) * np.abs(polarizability)

    across, along = alpha(mean), alpha(harmonic)
    return CellTensors(
        root=_assemble(np.sqrt(across), np.sqrt(along), normal),
        loss=_assemble(loss_of(mean, across), loss_of(harmonic, along), normal),
        arithmetic=arithmetic,
    )
