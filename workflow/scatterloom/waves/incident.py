"""The incident block of a lattice particle: a^1/2 E of every wave, sorted into parity classes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice
from scatterloom.waves.basis import WaveBasis
from scatterloom.waves.fields import wave_fields


@dataclass(frozen=True)
class IncidentBlock:
    """Right-hand sides of one lattice particle.

    Attributes
    ----------
    basis : WaveBasis
    members : list of int64 (n_wave_of_class,)
        Indices into the basis of the waves of each class.
    rows : list of complex (n_wave_of_class, 3 n_cell)
        ``a^1/2 E`` on the fundamental cells, scaled by the square root of the number
        of images so that products of rows are those on the whole particle.
    norms : list of float64 (n_wave_of_class,)
    """

    basis: WaveBasis
    members: list[NDArray[np.int64]]
    rows: list[NDArray]
    norms: list[NDArray[np.float64]]


def incident_block(
    lattice: Lattice, matrix: LatticeMatrix, size_parameter: float, basis: WaveBasis
) -> IncidentBlock:
    """Incident waves of the basis on the cells of a lattice particle."""
    points = size_parameter * lattice.centre()[matrix.fundamental]
    fields = wave_fields(basis, points)
    root = matrix.root
    class_of = basis.class_of(lattice.mirrors)
    members, rows, norms = [], [], []
    images = np.sqrt(float(matrix.n_class))
    for c in range(matrix.n_class):
        member = np.flatnonzero(class_of == c)
        x, y, z = (images * fields[member, q] for q in range(3))
        block = np.empty((len(member), 3, matrix.n_cell), dtype=matrix.dtype)
        block[:, 0] = root[0] * x + root[3] * y + root[4] * z
        block[:, 1] = root[3] * x + root[1] * y + root[5] * z
        block[:, 2] = root[4] * x + root[5] * y + root[2] * z
        flat = block.reshape(len(member), 3 * matrix.n_cell)
        members.append(member)
        rows.append(flat)
        norms.append(np.linalg.norm(flat, axis=1).astype(np.float64))
    return IncidentBlock(basis, members, rows, norms)
