"""Solve the whole wave block of one case on one lattice, stopped on the operator's own error."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from scatterloom.dipole.product import LatticeMatrix
from scatterloom.dipole.sectors import Sectors
from scatterloom.solve.minimal_residual import ClassIterate

BAD_START = 0.3
"""A start whose images miss the incident block by more than this is dropped."""

_RESCALE = 4
"""Steps after which the scale of the amplitudes is computed anew."""

_UNSEEN = 4.0
"""Error of a solve from a start over its remainder, at most (measured: 0.2 to 3.4)."""

_PROBES = 15
"""Directions, shared by all sectors, of a product that probes a solve from a start."""

_PROBED = 1.5
"""Error after a probe over remainder and change together, at most (measured: 0.2 to 1.3)."""

_ROUNDING = 8.0
"""Error of the amplitudes by rounding alone, in units of the precision (measured: 1 to 4)."""


@dataclass
class BlockSolution:
    """Outcome of a block solve.

    Attributes
    ----------
    amplitudes : list of complex128 (n_wave_of_sector, n_wave_of_sector)
        S of each sector, corrected by its remainder.
    remainder : list of complex128, same shapes
        R^T R of each sector, the leading term of the error before the correction.
    fields : list of complex (n_wave_of_sector, n_row_of_sector)
        X + R of each sector.
    error : float
        Estimated relative error (Frobenius) of the amplitudes: the size of the
        remainder, which is already added, hence on the safe side; after a start, four times
        that, or what a probe found (`_Probe`). Never below what rounding in the matrix's
        precision leaves.
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
        Estimated error after every block of products.
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


def _norm(blocks: Sequence[NDArray], copies: Sequence[int]) -> float:
    """Frobenius norm over all classes; some sectors stand for two."""
    squares = (c * np.linalg.norm(b) ** 2 for c, b in zip(copies, blocks, strict=True))
    return float(np.sqrt(sum(squares)))


class _Probe:
    """Error of the amplitudes after a start, seen by what a further product changes.

    What a start lacks lies along resonances, on which A is small: the remainder R^T R then
    falls short of the error R^T A^-1 R (by up to 3.4, measured). One product with the few
    directions that lead the remainder shows it, as the change of the amplitudes, and takes
    most of it away.
    """

    def __init__(self, copies: Sequence[int]) -> None:
        self._copies = copies
        self._before: list[NDArray] = []

    @property
    def wanted(self) -> bool:
        """Whether the next product is to be a probe."""
        return bool(self._before)

    def forget(self) -> None:
        """Drop amplitudes that are not the last ones."""
        self._before = []

    def error(self, iterates: Sequence[ClassIterate], missing: float, allowed: float) -> float:
        """Norm of the error for a remainder of norm `missing`."""
        if _UNSEEN * missing <= allowed:
            return _UNSEEN * missing
        before, self._before = self._before, [it.strong_amplitudes() for it in iterates]
        if not before:
            return _UNSEEN * missing
        change = [now - old for now, old in zip(self._before, before, strict=True)]
        return _PROBED * (missing + _norm(change, self._copies))

    def directions(self, iterates: Sequence[ClassIterate]) -> list[NDArray]:
        """A few directions of every sector."""
        count = max(2, _PROBES // len(iterates))
        return [iterate.leading(max(1, min(count, iterate.strong // 4))) for iterate in iterates]


def solve_block(
    matrix: LatticeMatrix,
    incident: Sequence[NDArray],
    tolerance: float,
    start: Sequence[NDArray] | None = None,
    max_steps: int = 60,
    progress: Callable[[float, float], None] | None = None,
    checkpoint: Callable[[Callable[[], list[NDArray]], float], None] | None = None,
    sectors: Sectors | None = None,
    keep: Callable[[NDArray], NDArray] | None = None,
) -> BlockSolution:
    """Solve ``A X = B`` for every sector until the amplitudes are good enough.

    Stops when ``|R^T R| <= tolerance |S|`` in the Frobenius norm over all classes,
    R being the residual block: the leading term of the error of the stationary
    amplitudes, not the residual itself, decides. After a start more is asked (`_Probe`).

    Parameters
    ----------
    matrix : LatticeMatrix
    incident : list of complex (n_wave_of_sector, n_row_of_sector)
        B of each sector, ``a^1/2 E`` scaled so that row products are those on the whole
        particle.
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
    sectors : Sectors, optional
        Those of `incident`; the parity classes if not given.
    keep : callable(block) -> block, optional
        Where search directions and their images are kept; in memory if missing (see
        `scatterloom.solve.spill.Spill`).

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
    sectors = Sectors(matrix) if sectors is None else sectors
    copies = [sector.copies for sector in sectors.all]
    iterates = [ClassIterate(block, keep) for block in incident]
    n_wave = sum(c * len(block) for c, block in zip(copies, incident, strict=True))
    # Before the first product the Born amplitudes stand in for the scale of S.
    scale = _combined([it.remainder_norm() for it in iterates], copies)
    used = 0
    packed_before = matrix.products
    start_residual, dropped = 1.0, False
    history: list[float] = []
    error = np.inf
    total = _total_residual(iterates, copies, 1.0)
    probe = _Probe(copies)

    def threshold() -> float:
        return 0.5 * tolerance * scale / np.sqrt(n_wave)

    for step in range(max_steps):
        if step == 0 and start is not None:
            blocks = [
                it.propose_start(first, threshold())
                for it, first in zip(iterates, start, strict=True)
            ]
            images = sectors.apply(blocks)
            used += sum(len(block) for block in blocks)
            wanted = [it.propose(threshold()) for it in iterates]
            shares = [
                it.shortfall(w, image)
                for it, w, image in zip(iterates, wanted, images, strict=True)
            ]
            missed, whole = np.sqrt(np.array(copies) @ np.square(shares))
            start_residual = missed / max(whole, 1e-300)
            if not start_residual <= BAD_START:
                dropped = True
                continue
        else:
            if probe.wanted:
                blocks = probe.directions(iterates)
            else:
                blocks = [it.propose(threshold()) for it in iterates]
            if not any(len(block) for block in blocks):
                break
            images = sectors.apply(blocks)
            used += sum(len(block) for block in blocks)
        for iterate, block, image in zip(iterates, blocks, images, strict=True):
            iterate.take(block, image)
        missing = _combined([it.remainder_norm() for it in iterates], copies)
        # Amplitudes change little after the first step: their scale is looked at again when
        # it decides, and now and then.
        if len(history) % _RESCALE == 0 or missing <= 1.5 * tolerance * scale:
            scale = _norm([it.strong_amplitudes() for it in iterates], copies)
        if missing <= tolerance * scale:
            missing = _whole_remainder(iterates, copies, tolerance * scale)
        if start is None or dropped:
            error = missing / scale
        elif missing <= tolerance * scale:
            error = probe.error(iterates, missing, tolerance * scale) / scale
        else:
            probe.forget()
            error = missing / scale
        history.append(error)
        residual = _total_residual(iterates, copies, total)
        if progress is not None:
            progress(error, residual)
        if error <= tolerance:
            break
        if checkpoint is not None:
            checkpoint(lambda: [iterate.corrected_fields() for iterate in iterates], used / n_wave)
        if len(history) > 8 and error > 0.9 * history[-5]:
            break
    parts = [iterate.amplitudes() for iterate in iterates]
    remainders = [rest for _, rest in parts]
    amplitudes = [stationary + rest for stationary, rest in parts]
    if not error <= tolerance:
        error = max(error, _norm(remainders, copies) / _norm(amplitudes, copies))
        history[-1] = error
    # The residual is updated, not recomputed, so the remainder does not see rounding.
    error = max(error, _ROUNDING * float(np.finfo(matrix.dtype).eps))
    return BlockSolution(
        amplitudes=amplitudes,
        remainder=remainders,
        # One free correction: A is close to one on what little is left.
        fields=[iterate.corrected_fields() for iterate in iterates],
        error=float(error),
        residual=_total_residual(iterates, copies, total),
        products=used / n_wave,
        packed_products=matrix.products - packed_before,
        converged=bool(error <= tolerance),
        start_residual=float(start_residual),
        start_dropped=dropped,
        history=history,
    )


def _whole_remainder(
    iterates: Sequence[ClassIterate], copies: Sequence[int], allowed: float
) -> float:
    """Norm of the remainder, its dear part by a bound if that is good enough."""
    bound = _combined([it.remainder_norm(it.across_bound()) for it in iterates], copies)
    if bound <= allowed:
        return bound
    return _combined([it.remainder_norm(it.across_norm()) for it in iterates], copies)


def _combined(norms: Sequence[float], copies: Sequence[int]) -> float:
    """Norm over all classes from that of each sector."""
    return float(np.sqrt(np.array(copies) @ np.square(norms)))


def _total_residual(iterates: Sequence[ClassIterate], copies: Sequence[int], total: float) -> float:
    squares = sum(c * it.squared_residual() for c, it in zip(copies, iterates, strict=True))
    return float(np.sqrt(squares)) / max(total, 1e-300)
