"""One case on one lattice level: fields, transition matrix and absorption."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.dipole.mixture import particle_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.dipole.sectors import Sectors, exchange_of_cells
from scatterloom.particle.lattice import Lattice
from scatterloom.solve.block import BlockSolution, solve_block
from scatterloom.solve.spill import Spill
from scatterloom.solve.start import StoredFields
from scatterloom.transition.matrix import TransitionMatrix, from_amplitudes, project
from scatterloom.transition.rotate import turned
from scatterloom.waves.basis import wave_basis
from scatterloom.waves.incident import IncidentBlock, incident_block


@dataclass(frozen=True)
class LevelResult:
    """Outcome of one case on one lattice level.

    Attributes
    ----------
    transition : TransitionMatrix
        Projected onto the symmetry of the shape.
    uncorrected : TransitionMatrix
        The same without the remainder added to the amplitudes: what it changes is an
        estimate of the solver's error.
    asymmetry : float
        Relative part (Frobenius) of the lattice's matrix that the projection took away:
        an effect of the lattice alone.
    absorption_efficiency : float
        From the power absorbed in the cells, averaged over random orientation.
    solution : BlockSolution
    fields : StoredFields
        Solved fields per unit incident norm, to start neighbouring sizes from.
    cells : int
        Cells of the whole particle.
    memory_bytes : int
        Fields, residuals and work space at the end of the solve.
    arithmetic_cells : bool
        Whether a negative real permittivity forced the arithmetic mean on cut cells.
    """

    transition: TransitionMatrix
    uncorrected: TransitionMatrix
    asymmetry: float
    absorption_efficiency: float
    solution: BlockSolution
    fields: StoredFields
    cells: int
    memory_bytes: int
    arithmetic_cells: bool


def solve_level(
    lattice: Lattice,
    indices: complex | Sequence[complex],
    size_parameter: float,
    n_max: int,
    tolerance: float,
    start: Callable[[list[NDArray[np.float64]]], list[NDArray] | None] | None = None,
    dtype: type = np.complex64,
    threads: int = 1,
    progress: Callable[[float, float], None] | None = None,
    checkpoint: Callable[[Callable[[], StoredFields], float], None] | None = None,
    spill: Path | None = None,
) -> LevelResult:
    """Solve all incident waves of one case on one lattice.

    Parameters
    ----------
    lattice : Lattice
    indices : complex or sequence of complex
        Refractive index of each material relative to the medium, from outside inwards.
    size_parameter : float
        Of the sphere of equal volume.
    n_max : int
        Truncation of the wave basis.
    tolerance : float
        Relative error of the amplitudes (see `solve_block`).
    start : callable(norms) -> rows per class or None, optional
        Makes a start from the norms of the incident waves.
    dtype : complex64 (default) or complex128
    threads : int
    progress : callable(error, residual), optional
    checkpoint : callable(fields, products), optional
        Called after every block of products but the last; `fields()` makes a start from
        which the solve can go on, `products` is how many a wave have been used.
    spill : Path, optional
        Folder on whose disk search directions and their images are kept instead of in memory.
    """
    kd = size_parameter * lattice.spacing
    materials = indices if isinstance(indices, Sequence) else [indices]
    tensors = particle_tensors(lattice, materials, kd)
    matrix = LatticeMatrix(lattice, tensors, kd, dtype, threads)
    sectors = Sectors(matrix, exchange_of_cells(lattice, tensors))
    incident = incident_block(lattice, matrix, size_parameter, wave_basis(n_max), sectors)
    first = None if start is None else start(incident.norms)

    def per_norm(blocks: list[NDArray]) -> StoredFields:
        rows = [
            block / norm[:, None].astype(block.real.dtype)
            for block, norm in zip(blocks, incident.norms, strict=True)
        ]
        return StoredFields(size_parameter, rows)

    def keep(blocks: Callable[[], list[NDArray]], products: float) -> None:
        if checkpoint is not None:
            checkpoint(lambda: per_norm(blocks()), products)

    solution = solve_block(
        matrix,
        incident.rows,
        tolerance,
        first,
        progress=progress,
        checkpoint=keep,
        sectors=sectors,
        keep=None if spill is None else Spill(spill),
    )
    raw = _of_particle(lattice, n_max, incident, solution.amplitudes)
    transition = project(raw, lattice.symmetry)
    stationary = [s - r for s, r in zip(solution.amplitudes, solution.remainder, strict=True)]
    uncorrected = project(_of_particle(lattice, n_max, incident, stationary), lattice.symmetry)
    lost = np.linalg.norm(raw.matrix - transition.matrix) / np.linalg.norm(raw.matrix)
    return LevelResult(
        transition=transition,
        uncorrected=uncorrected,
        asymmetry=float(lost),
        absorption_efficiency=_absorption(sectors, solution.fields, size_parameter),
        solution=solution,
        fields=per_norm(solution.fields),
        cells=len(lattice.cell),
        memory_bytes=matrix.nbytes + 3 * sum(rows.nbytes for rows in incident.rows),
        arithmetic_cells=tensors.arithmetic,
    )


def _of_particle(
    lattice: Lattice, n_max: int, incident: IncidentBlock, amplitudes: Sequence[NDArray]
) -> TransitionMatrix:
    """Transition matrix in the particle's own frame."""
    transition = from_amplitudes(n_max, *incident.of_all_waves(amplitudes))
    if lattice.rotation is None:
        return transition
    return turned(transition, lattice.rotation.T)


@njit(cache=True)
def _power(rows, loss):  # type: ignore[no-untyped-def]
    """Sum of x^H L x over cells and waves, L real and symmetric."""
    total = 0.0
    for w in range(rows.shape[0]):
        for o in range(rows.shape[2]):
            x, y, z = rows[w, 0, o], rows[w, 1, o], rows[w, 2, o]
            power = loss[0, o] * (x.real * x.real + x.imag * x.imag)
            power += loss[1, o] * (y.real * y.real + y.imag * y.imag)
            power += loss[2, o] * (z.real * z.real + z.imag * z.imag)
            power += 2.0 * loss[3, o] * (x.real * y.real + x.imag * y.imag)
            power += 2.0 * loss[4, o] * (x.real * z.real + x.imag * z.imag)
            power += 2.0 * loss[5, o] * (y.real * z.real + y.imag * z.imag)
            total += power
    return total


def _absorption(sectors: Sectors, fields: list[NDArray], size_parameter: float) -> float:
    """Absorption efficiency from the loss in the cells.

    One plane wave: C_abs = 4 pi sum x^H L x (Bohren & Huffman 1983, section 3.2, applied to
    dipoles); the mean over all plane waves is 2 pi times the sum over normalized waves.
    """
    loss = sectors.matrix.loss
    total = 0.0
    for sector, part in zip(sectors.all, fields, strict=True):
        rows = sectors.whole(sector, part).reshape(len(part), 3, sectors.matrix.n_cell)
        power = _power(rows, loss)
        # The image of a sector absorbs as much.
        total += sector.copies * power
    return 8.0 * np.pi**2 * total / (np.pi * size_parameter**2)
