"""Solve one case: all its lattices, again with a longer basis or finer lattices where needed."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import Shape
from scatterloom.scattering import record
from scatterloom.scattering.case import Asked, combine_levels
from scatterloom.scattering.record import CaseRecord, failed_record
from scatterloom.solve.start import interpolated_start, nearest
from scatterloom.store.fields import FieldFile
from scatterloom.transition.level import LevelResult, solve_level

_GIVE_UP = 0.01
"""A relative error of the amplitudes above this is no result at all."""

_INFILL_TOLERANCE = 0.5
"""Share of the tolerance allowed to a size started from its neighbours.

What such a start lacks lies along resonances, where the error estimate reads up to three
times too low (measured); a stricter estimate costs a fraction of a product.
"""

_LONGER_BASES = 2
"""How often the truncation may be raised before the case is flagged."""


@dataclass(frozen=True)
class Task:
    """What all cases of a job share.

    `cells` are the lattices a case begins with, coarse to fine; up to `refinements` times
    finer ones follow if the accuracy asked is not met.
    """

    name: str
    kind: str
    shape: Shape
    shape_json: str
    index: complex
    cells: tuple[int, ...]
    refinements: int
    tolerance: float
    asked: Asked
    threads: int
    inner_indices: tuple[complex, ...] = ()

    @property
    def indices(self) -> tuple[complex, ...]:
        """Indices of all materials, from outside inwards."""
        return (self.index, *self.inner_indices)

    @property
    def lengths(self) -> tuple[float, ...]:
        """Half extents of the nested bodies: what should lie alike on all lattices."""
        return tuple(
            float(scale * half) for scale in self.shape.scales for half in self.shape.half_extents
        )

    @property
    def radii(self) -> tuple[float, ...]:
        """Half extents and circumscribed radius: what sets the truncation."""
        half = (float(length) for length in self.shape.half_extents)
        return (*half, self.shape.circumscribed_radius)


class _Solves:
    """The lattices of one case solved so far, at one truncation."""

    def __init__(
        self,
        task: Task,
        x: float,
        anchors: Sequence[FieldFile],
        progress: Callable[[float, float], None],
    ) -> None:
        self._task, self._x, self._progress = task, x, progress
        self._around = nearest(anchors, x)
        self.by_cells: dict[int, LevelResult] = {}
        self.products: list[float] = []

    def get(self, cells: int, n_max: int) -> LevelResult:
        if cells not in self.by_cells:
            self.by_cells[cells] = self._solve(cells, n_max)
            self.products.append(self.by_cells[cells].solution.products)
        return self.by_cells[cells]

    def _solve(self, cells: int, n_max: int) -> LevelResult:
        task = self._task
        # Neighbours have fields on the lattices of the job only, not on finer ones.
        shared = task.cells.index(cells) if cells in task.cells else None
        neighbours = [] if shared is None else [entry.levels[shared] for entry in self._around]
        tolerance = task.tolerance * (_INFILL_TOLERANCE if neighbours else 1.0)
        return solve_level(
            lattice(task.shape, cells),
            task.indices,
            self._x,
            n_max,
            tolerance,
            start=interpolated_start(neighbours, self._x) if neighbours else None,
            threads=task.threads,
            progress=lambda error, residual: self._progress(self._x, residual),
        )


def solve_case(
    task: Task,
    digest: str,
    x: float,
    anchors: Sequence[FieldFile],
    progress: Callable[[float, float], None],
) -> tuple[CaseRecord, list[LevelResult]]:
    """Solve one case as accurately as asked, if the lattices allowed can do it.

    Parameters
    ----------
    task : Task
    digest : str
        Identity of the case.
    x : float
        Size parameter.
    anchors : sequence of FieldFile
        Solved sizes to start from; none for a zero start.
    progress : callable(size_parameter, residual)

    Returns
    -------
    record : CaseRecord
        Flagged where the accuracy, the truncation or the solver fell short.
    levels : list of LevelResult
        On the lattices of the task, for starts of other sizes.
    """
    begun = time.perf_counter()
    n_max = effort.n_max(task.radii, x, task.asked.f11_relative)
    bits = {name: bit for name, (bit, _) in record.FLAGS.items()}
    cells, longer, finer = task.cells, _LONGER_BASES, task.refinements
    solves = _Solves(task, x, anchors, progress)
    while True:
        levels = [solves.get(n, n_max) for n in cells]
        # Solved again if the basis became longer on finer lattices.
        own = [solves.get(n, n_max) for n in task.cells]
        infilled = bool(anchors) and not any(lv.solution.start_dropped for lv in own)
        cold = float(np.mean([lv.solution.products for lv in own]))
        solved = combine_levels(
            levels,
            cells,
            task.shape.symmetry,
            task.indices,
            x,
            lattice(task.shape, cells[-1]).spacing,
            task.asked,
            digest=digest,
            shape=task.shape_json,
            start="infill" if infilled else "cold",
            products=float(np.mean(solves.products)),
            cold_products_estimate=_cold_estimate(anchors, x) if anchors else cold,
            wall_seconds=time.perf_counter() - begun,
        )
        if solved.warning_flags & bits["truncation"] and longer:
            n_max, longer = n_max + 3, longer - 1
            solves.by_cells.clear()
        elif solved.warning_flags & bits["accuracy_not_met"] and finer:
            cells, finer = effort.finer_levels(task.lengths, cells), finer - 1
        else:
            break
    if not solved.operator_error < _GIVE_UP:
        flags = solved.warning_flags | bits["not_converged"]
        return failed_record(digest, task.shape_json, task.indices, x, cells, flags), own
    return solved, own


def _cold_estimate(anchors: Sequence[FieldFile], x: float) -> float:
    """Products a zero start would have used at `x`, from those the anchors around it used."""
    sizes = [anchor.size_parameter for anchor in anchors]
    return float(np.interp(x, sizes, [anchor.products for anchor in anchors]))
