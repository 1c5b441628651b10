"""Cell tensors of particles of several materials, and of particles with edges and corners."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.polarizability import CellTensors, boundary_shift, cell_tensors, self_term
from scatterloom.particle.lattice import MEDIUM, Composition, Lattice

MODE = "inverse"

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
    return mixed_cell_tensors(lattice.composition, indices, kd)


def mixed_cell_tensors(
    composition: Composition, indices: Sequence[complex], kd: float
) -> CellTensors:
    eps = np.array([complex(m) ** 2 for m in indices])
    arithmetic = bool(np.any(eps.real < 0.0))
    mean = 1.0 + (eps - 1.0) @ composition.fraction
    inverse = 1.0 + (1.0 / eps - 1.0) @ composition.fraction
    total = np.zeros(mean.size)
    spread = np.zeros((mean.size, 3, 3))
    vec = np.zeros((mean.size, 3))
    for (inside, outside), vector in zip(
        composition.interfaces, composition.area_vector, strict=True
    ):
        area = np.linalg.norm(vector, axis=1)
        cut = np.flatnonzero(area > 0.0)
        if not cut.size:
            continue
        area = area[cut]
        normal = vector[cut] / area[:, None]
        inner = eps[inside]
        outer = 1.0 if outside == MEDIUM else eps[outside]
        along, across = boundary_shift(normal, inner / outer)
        mean[cut] += across * area * (inner - outer)
        inverse[cut] += along * area * (1.0 / inner - 1.0 / outer)
        total[cut] += area
        spread[cut] += area[:, None, None] * normal[:, :, None] * normal[:, None, :]
        vec[cut] += vector[cut]
    cut = np.flatnonzero(total > 0.0)
    share = np.zeros((mean.size, 3))
    frame = np.broadcast_to(np.eye(3), spread.shape).copy()
    if not arithmetic:
        if MODE in ("sum", "weighted"):
            length = np.linalg.norm(vec, axis=1)
            nn = vec[:, :, None] * vec[:, None, :] / np.where(length > 1e-12, length, 1)[:, None, None] ** 2
            if MODE == "weighted":
                nn *= (length / np.where(total > 0, total, 1))[:, None, None]
            share[cut], frame[cut] = np.linalg.eigh(nn[cut])
        else:
            share[cut], frame[cut] = np.linalg.eigh(spread[cut] / total[cut, None, None])
    if MODE == "direct":
        permittivity = share / inverse[:, None] + (1.0 - share) * mean[:, None]
    else:
        permittivity = 1.0 / (share * inverse[:, None] + (1.0 - share) / mean[:, None])
    volume = kd**3
    inverse_chi = 4 * np.pi / (permittivity - 1.0)
    alpha = volume / (inverse_chi - self_term(kd))
    loss = -(inverse_chi.imag / volume) * np.abs(alpha) ** 2
    return CellTensors(_six(np.sqrt(alpha), frame), _six(loss, frame), arithmetic)


def _six(values: NDArray, frame: NDArray[np.float64]) -> NDArray:
    """Tensors with these eigenvalues (n_cell, 3) and eigenvectors as components xx .. yz."""
    full = (frame * values[:, None, :]) @ np.swapaxes(frame, 1, 2)
    return np.stack([full[:, p, q] for p, q in ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))], 1)
