"""Cell tensors of particles of several materials, and of particles with edges and corners."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.exchange import exchanges
from scatterloom.dipole.polarizability import CellTensors, boundary_shift, cell_tensors, self_term
from scatterloom.particle.bodies import Surface
from scatterloom.particle.lattice import Lattice
from scatterloom.solids.mesh import MEDIUM


def particle_tensors(lattice: Lattice, indices: Sequence[complex], kd: float) -> CellTensors:
    """Polarizability of the cells of any particle.

    Parameters
    ----------
    lattice : Lattice
    indices : sequence of complex
        Refractive index of each material relative to the medium, from outside inwards.
    kd : float
        Lattice spacing times wavenumber.

    Raises
    ------
    ValueError
        If the number of indices is not that of the particle's materials.
    """
    materials = len(lattice.fraction)
    if len(indices) != materials:
        raise ValueError(f"{len(indices)} refractive indices for {materials} materials")
    if lattice.composition is None:
        return cell_tensors(lattice.fill, lattice.normal, indices[0], kd, lattice.area)
    return mixed_cell_tensors(lattice, indices, kd)


def mixed_cell_tensors(lattice: Lattice, indices: Sequence[complex], kd: float) -> CellTensors:
    """Polarizability of cells of several materials, with any number of interfaces in each.

    With the arithmetic mean a and the harmonic mean h of the permittivity, and the dyad
    N = <n n> of the normal averaged over all interfaces in the cell (weighted by area and
    contrast), the inverse
    permittivity is N / h + (I - N) / a (Kottke et al. 2008, Phys. Rev. E 77, 036611, with
    N in place of n n). One interface, or parallel ones such as those of a thin plate, give
    the two means along the normal and across it; a dyad, unlike a mean normal, does not
    cancel between faces that look in opposite directions. At an edge or a corner no mean
    is exact. Of the forms tried there on cubes and hexagonal prisms (normal of the summed
    area vectors, the same with its share reduced as they cancel, this one in epsilon or
    in its inverse) this one leaves the same error however the lattice is turned or
    shifted: that of the edges themselves on lattices along the faces, which cut no cell.

    Each interface is shifted as `boundary_shift` says, with the permittivity inside relative to
    that outside, since a static field does not change when all permittivities are scaled:
    the contrast of (e1, e2) is (e1 - e2)/(e1 + 2 e2), and the shift moves e2 to e1. Where the
    lattice knows the first moments of its cells, material moves between neighbours as
    `scatterloom.dipole.exchange` says.

    Parameters
    ----------
    lattice : Lattice
        One that has a composition.
    indices : sequence of complex (n_material,)
        Relative to the medium, from outside inwards.
    kd : float
        Lattice spacing times wavenumber.
    """
    eps = np.array([complex(m) ** 2 for m in indices])
    arithmetic = bool(np.any(eps.real < 0.0))
    mean = 1.0 + (eps - 1.0) @ lattice.fraction
    inverse = 1.0 + (1.0 / eps - 1.0) @ lattice.fraction
    total = np.zeros(mean.size)
    dyad = np.zeros((mean.size, 3, 3))
    surfaces = () if lattice.composition is None else lattice.composition.surfaces
    for surface in () if arithmetic else surfaces:
        area = np.linalg.norm(surface.vector, axis=1)
        some = area > 0.0
        cell, area = surface.cell[some], area[some]
        normal = surface.vector[some] / area[:, None]
        inner, outer = _two_sides(surface, eps)
        along, across = boundary_shift(normal, inner / outer)
        # A cell may hold several pieces.
        np.add.at(mean, cell, across * area * (inner - outer))
        np.add.at(inverse, cell, along * area * (1.0 / inner - 1.0 / outer))
        weight = _contrast(inner, outer) * area
        np.add.at(total, cell, weight)
        np.add.at(dyad, cell, weight[:, None, None] * normal[:, :, None] * normal[:, None, :])
    for step in () if arithmetic else exchanges(lattice):
        inner, outer = _two_sides(step.surface, eps)
        for cells, amount in ((step.giver, -step.amount), (step.taker, step.amount)):
            # A cell may take from several neighbours.
            np.add.at(mean, cells, amount * (inner - outer))
            np.add.at(inverse, cells, amount * (1.0 / inner - 1.0 / outer))
        weight = _contrast(inner, outer) * np.abs(step.amount)
        np.add.at(total, step.taker, weight)
        np.add.at(dyad, step.taker, weight[:, None, None] * step.dyad)
    share = np.zeros((mean.size, 3))
    frame = np.broadcast_to(np.eye(3), dyad.shape).copy()
    cut = np.flatnonzero(total)
    share[cut], frame[cut] = np.linalg.eigh(dyad[cut] / total[cut, None, None])
    # Where there is no surface, and for a share of zero, the mean itself to the last bit.
    share = np.where(share > 1e-14, share, 0.0)
    mixed = 1.0 / (share * inverse[:, None] + (1.0 - share) / mean[:, None])
    permittivity = np.where(share > 0.0, mixed, mean[:, None])
    volume = kd**3
    inverse_chi = 4 * np.pi / (permittivity - 1.0)
    alpha = volume / (inverse_chi - self_term(kd))
    loss = -(inverse_chi.imag / volume) * np.abs(alpha)  # P = alpha^1/2 x
    return CellTensors(
        root=_components(np.sqrt(alpha), frame),
        loss=_components(loss, frame),
        arithmetic=arithmetic,
    )


def _two_sides(surface: Surface, eps: NDArray[np.complex128]) -> tuple[complex, complex]:
    """Permittivity inside and outside."""
    return eps[surface.inside], 1.0 if surface.outside == MEDIUM else eps[surface.outside]


def _contrast(inner: complex, outer: complex) -> float:
    """Weight of an interface in the mean dyad: one without contrast is none."""
    return abs((inner - outer) / (inner + outer))


def _components(values: NDArray, frame: NDArray[np.float64]) -> NDArray:
    """Tensors with these eigenvalues (n_cell, 3) and eigenvectors as xx, yy, zz, xy, xz, yz."""
    full = (frame * values[:, None, :]) @ np.swapaxes(frame, 1, 2)
    pairs = ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))
    return np.stack([full[:, p, q] for p, q in pairs], axis=1)
