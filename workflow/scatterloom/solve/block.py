"""Solve the whole wave block of one case on one lattice, stopped on the operator's own error."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.solve.minimal_residual import ClassIterate

BAD_START = 0.3
"""A start whose images miss the incident block by more than this is dropped."""

_ROUNDING = 8.0
"""Error of the amplitudes by rounding alone, in units of the precision (measured: 1 to 4)."""


@dataclass
class BlockSolution:
    """Outcome of a block solve.

    Attributes
    ----------
    amplitudes : list of complex128 (n_wave_of_class, n_wave_of_class)
        S of each parity class, corrected by its remainder.
    remainder : list of complex128, same shapes
        R^T R of each class, the leading term of the error before the correction.
    fields : list of complex (n_wave_of_class, 3 n_cell)
        X + R of each class.
    error : float
        Estimated relative error (Frobenius) of the amplitudes: the size of the
        remainder, which is already added, hence on the safe side in most cases. Never
        below what rounding in the matrix's precision leaves.
    residual : float
        Relative residual norm of the block.
    products : float
        Products per incident wave (waves multiplied by A over waves in the basis).
    packed_products : int
        Applications of the packed matrix product.
    converged : bool
    start_residual : float
        Relative residual of the start as it was given; 1 for a zero start.
    start_dropped : bool
    history : list of float
        Relative size of the remainder after every block of products.
    """

    amplitudes: list[NDArray]
    remainder: list[NDArray]
    fields: list[NDArray]
    error: float
    residual: float
    products: float
    packed_products: int
    converged: bool
    start_residual: float = 1.0
    start_dropped: bool = False
    history: list[float] = field(default_factory=list)


def _apply(matrix: LatticeMatrix, blocks: Sequence[NDArray]) -> list[NDArray]:
    """A times one block of rows for every class, packed."""
    width = max(len(block) for block in blocks)
    shape = (matrix.n_class, width, 3, matrix.n_cell)
    packed = np.zeros(shape, dtype=matrix.dtype)
    for c, block in enumerate(blocks):
        packed[c, : len(block)] = block.reshape(len(block), 3, matrix.n_cell)
    image = matrix(packed)
    return [
        image[c, : len(block)].reshape(len(block), 3 * matrix.n_cell)
        for c, block in enumerate(blocks)
    ]


def _norm(blocks: Sequence[NDArray]) -> float:
    return float(np.sqrt(sum(np.linalg.norm(block) ** 2 for block in blocks)))


def solve_block(
    matrix: LatticeMatrix,
    incident: Sequence[NDArray],
    tolerance: float,
    start: Sequence[NDArray] | None = None,
    max_steps: int = 60,
    progress: Callable[[float, float], None] | None = None,
    checkpoint: Callable[[Callable[[], list[NDArray]], float], None] | None = None,
) -> BlockSolution:
    """Solve ``A X = B`` for every parity class until the amplitudes are good enough.

    Stops when ``|R^T R| <= tolerance |S|`` in the Frobenius norm over all classes,
    R being the residual block: the leading term of the error of the stationary
    amplitudes, not the residual itself, decides.

    Parameters
    ----------
    matrix : LatticeMatrix
    incident : list of complex (n_wave_of_class, 3 n_cell)
        B of each class, ``a^1/2 E`` scaled so that row products on the fundamental
        cells are those on the whole particle.
    tolerance : float
        Relative error of the amplitudes asked for.
    start : list like `incident`, optional
        A first X; left untouched. None is the zero start.
    max_steps : int
        Largest number of blocks of products.
    progress : callable(error, residual), optional
        Called after every block of products.
    checkpoint : callable(fields, products), optional
        Called likewise; `fields()` makes the best fields so far, as a later start.

    Returns
    -------
    BlockSolution
        `converged` is False if `max_steps` was used up or the iteration stagnated.

    Raises
    ------
    ValueError
        If the tolerance is not positive.
    """
    if not tolerance > 0.0:
        raise ValueError(f"tolerance is {tolerance}, must be positive")
    iterates = [ClassIterate(block) for block in incident]
    n_wave = sum(len(block) for block in incident)
    # Before the first product the Born amplitudes stand in for the scale of S.
    scale = _norm([(block @ block.T) for block in incident])
    used = 0
    packed_before = matrix.products
    start_residual, dropped = 1.0, False
    history: list[float] = []
    amplitudes: list[NDArray] = []
    remainders: list[NDArray] = []
    error = np.inf

    def threshold() -> float:
        return 0.5 * tolerance * scale / np.sqrt(n_wave)

    for step in range(max_steps):
        if step == 0 and start is not None:
            blocks = [
                it.propose_start(first, threshold())
                for it, first in zip(iterates, start, strict=True)
            ]
            images = _apply(matrix, blocks)
            used += sum(len(block) for block in blocks)
            wanted = [it.propose(threshold()) for it in iterates]
            shares = [
                it.shortfall(w, image)
                for it, w, image in zip(iterates, wanted, images, strict=True)
            ]
            missed, whole = np.sqrt(np.sum(np.square(shares), axis=0))
            start_residual = missed / max(whole, 1e-300)
            if not start_residual <= BAD_START:
                dropped = True
                continue
        else:
            blocks = [it.propose(threshold()) for it in iterates]
            if not any(len(block) for block in blocks):
                break
            images = _apply(matrix, blocks)
            used += sum(len(block) for block in blocks)
        for iterate, block, image in zip(iterates, blocks, images, strict=True):
            iterate.take(block, image)
        parts = [iterate.amplitudes() for iterate in iterates]
        remainders = [part[1] for part in parts]
        amplitudes = [part[0] + part[1] for part in parts]
        scale = _norm(amplitudes)
        error = _norm(remainders) / scale
        history.append(error)
        residual = _total_residual(iterates)
        if progress is not None:
            progress(error, residual)
        if error <= tolerance:
            break
        if checkpoint is not None:
            checkpoint(
                lambda: [iterate.fields + iterate.residual for iterate in iterates], used / n_wave
            )
        if len(history) > 8 and error > 0.9 * history[-5]:
            break
    # The residual is updated, not recomputed, so the remainder does not see rounding.
    error = max(error, _ROUNDING * float(np.finfo(matrix.dtype).eps))
    return BlockSolution(
        amplitudes=amplitudes,
        remainder=remainders,
        # One free correction: A is close to one on what little is left.
        fields=[iterate.fields + iterate.residual for iterate in iterates],
        error=float(error),
        residual=_total_residual(iterates),
        products=used / n_wave,
        packed_products=matrix.products - packed_before,
        converged=bool(error <= tolerance),
        start_residual=float(start_residual),
        start_dropped=dropped,
        history=history,
    )


def _total_residual(iterates: Sequence[ClassIterate]) -> float:
    missed = _norm([iterate.residual for iterate in iterates])
    return missed / max(_norm([iterate.incident for iterate in iterates]), 1e-300)
