"""Wave blocks of small particles with their amplitudes from the inverse of the full matrix."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from lattice_kit import full_matrix, of_shape, packed_matrix, unfold
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice
from scatterloom.waves.basis import wave_basis
from scatterloom.waves.incident import IncidentBlock, incident_block


@dataclass(frozen=True, eq=False)
class Problem:
    """Blocks of all parity classes; `full` is A on the whole lattice, in double precision."""

    cells: Lattice
    index: complex
    size_parameter: float
    n_max: int
    full: NDArray[np.complex128]
    solution: list[NDArray[np.complex128]]
    amplitudes: list[NDArray[np.complex128]]

    def matrix(self, dtype: type = np.complex128) -> LatticeMatrix:
        return packed_matrix(
            self.cells, self.index, self.size_parameter * self.cells.spacing, dtype
        )

    def incident(self, matrix: LatticeMatrix) -> IncidentBlock:
        return incident_block(self.cells, matrix, self.size_parameter, wave_basis(self.n_max))

    def at(self, size_parameter: float) -> Problem:
        """The same particle at another size, without the reference solution."""
        return Problem(self.cells, self.index, size_parameter, self.n_max, np.empty(0), [], [])


def whole(cells: Lattice, matrix: LatticeMatrix, parity_class: int, rows: NDArray) -> NDArray:
    """Rows on the fundamental cells as vectors on all cells, norms kept."""
    packed = np.zeros((matrix.n_class, len(rows), 3, matrix.n_cell), complex)
    packed[parity_class] = rows.reshape(len(rows), 3, matrix.n_cell)
    return unfold(cells, packed)[parity_class].reshape(len(rows), -1) / np.sqrt(matrix.n_class)


def folded(cells: Lattice, matrix: LatticeMatrix, full_rows: NDArray) -> NDArray:
    """Inverse of `whole`."""
    at = full_rows.reshape(len(full_rows), len(cells.cell), 3)[:, matrix.fundamental]
    return np.sqrt(matrix.n_class) * at.transpose(0, 2, 1).reshape(len(full_rows), -1)


def problem(
    spec, cells_across, index, size_parameter, n_max, mirrors=(True, True, True)
) -> Problem:
    cells = of_shape(spec, cells_across, mirrors)
    kd = size_parameter * cells.spacing
    full = full_matrix(cells, index, kd)
    matrix = packed_matrix(cells, index, kd)
    block = incident_block(cells, matrix, size_parameter, wave_basis(n_max))
    solution, amplitudes = [], []
    for c, rows in enumerate(block.rows):
        b = whole(cells, matrix, c, rows)
        x = np.linalg.solve(full, b.T).T
        solution.append(folded(cells, matrix, x))
        amplitudes.append(b @ x.T)
    return Problem(cells, index, size_parameter, n_max, full, solution, amplitudes)


def distance(found, expected) -> float:
    """Relative Frobenius distance over all classes."""
    miss = sum(np.linalg.norm(f - e) ** 2 for f, e in zip(found, expected, strict=True))
    return float(np.sqrt(miss / sum(np.linalg.norm(e) ** 2 for e in expected)))
