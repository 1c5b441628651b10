"""Solve one case: all its lattices, again with a longer basis or finer lattices where needed."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from scatterloom.campaign import effort
from scatterloom.campaign.memory import case_bytes
from scatterloom.limits import Limits, OutOfTime, forget_peak, peak_bytes
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import Shape
from scatterloom.particle.thickness import has_thin_part
from scatterloom.scattering import record
from scatterloom.scattering.case import Asked, combine_levels
from scatterloom.scattering.record import CaseRecord, failed_record
from scatterloom.solve.start import StoredFields, interpolated_start, nearest
from scatterloom.store.checkpoint import Checkpoint, Saved
from scatterloom.store.fields import FieldFile
from scatterloom.transition.level import LevelResult, solve_level

_GIVE_UP = 0.01
"""A relative error of the amplitudes above this is no result at all."""

_LONGER_BASES = 2
"""How often the truncation may be raised before the case is flagged."""


_BIT = {name: bit for name, (bit, _) in record.FLAGS.items()}
_REASON = {OutOfTime: "no_time", MemoryError: "no_memory"}


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
    limits: Limits = field(default_factory=Limits)
    state: Path | None = None
    """Folder of checkpoints; None for none."""
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
        digest: str,
        x: float,
        anchors: Sequence[FieldFile],
        progress: Callable[[float, float], None],
    ) -> None:
        self._task, self._x, self._progress = task, x, progress
        self._around = nearest(anchors, x)
        self._begun = time.monotonic()
        self.by_cells: dict[int, LevelResult] = {}
        self.products: list[float] = []
        self.checkpoint = (
            Checkpoint(task.state / f"{digest}.npz", task.limits.checkpoint_seconds)
            if task.state is not None
            else None
        )
        self._saved = self.checkpoint.read() if self.checkpoint else {}
        self.spill: Path | None = None
        """Where search directions go; None while memory holds them."""

    @property
    def seconds(self) -> float:
        """Time spent on the case by this process."""
        return time.monotonic() - self._begun

    def get(self, cells: int, n_max: int) -> LevelResult:
        if cells not in self.by_cells:
            before = self._saved.get((cells, n_max))
            level = self._solve(cells, n_max, before)
            self.by_cells[cells] = level
            self.products.append(level.solution.products + (before.products if before else 0.0))
        return self.by_cells[cells]

    def _solve(self, cells: int, n_max: int, saved: Saved | None) -> LevelResult:
        task = self._task
        # Neighbours have fields on the lattices of the job only, not on finer ones.
        shared = task.cells.index(cells) if cells in task.cells else None
        neighbours = [] if shared is None else [entry.levels[shared] for entry in self._around]
        # What an interrupted solve had reached is nearer than any neighbour.
        nodes = [saved.fields] if saved is not None else neighbours
        earlier = saved.products if saved is not None else 0.0

        def watch(error: float, residual: float) -> None:
            task.limits.check(self.seconds)
            self._progress(self._x, residual)

        def keep(fields: Callable[[], StoredFields], new: float) -> None:
            if self.checkpoint is None:
                return
            self.checkpoint.offer(
                lambda: self._finished(n_max) | {(cells, n_max): Saved(fields(), earlier + new)}
            )

        return solve_level(
            lattice(task.shape, cells),
            task.indices,
            self._x,
            n_max,
            task.tolerance,
            start=interpolated_start(nodes, self._x) if nodes else None,
            threads=task.threads,
            progress=watch,
            checkpoint=keep,
            spill=self.spill,
        )

    def _finished(self, n_max: int) -> dict[tuple[int, int], Saved]:
        return {
            (cells, n_max): Saved(level.fields, level.solution.products)
            for cells, level in self.by_cells.items()
        }


def solve_case(
    task: Task,
    digest: str,
    x: float,
    anchors: Sequence[FieldFile],
    progress: Callable[[float, float], None],
) -> tuple[CaseRecord, list[LevelResult]]:
    """Solve one case as accurately as asked, if the lattices and limits allowed can do it.

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
        Flagged where the accuracy, the truncation or the solver fell short; failed, with
        the flag of its reason, where a limit was exceeded before there was any result.
    levels : list of LevelResult
        On the lattices of the task, for starts of other sizes; empty for a failed case.
    """
    forget_peak()
    if not _fits(task, x, task.cells, len(anchors)):
        return failed_case(task, digest, x, "no_memory"), []
    case = _Case(task, digest, x, anchors, progress)
    try:
        solved, own = case.solve()
    except (OutOfTime, MemoryError, np.linalg.LinAlgError, FloatingPointError) as error:
        if case.best is None:
            if case.solves.checkpoint:
                case.solves.checkpoint.remove()
            return failed_case(task, digest, x, _REASON.get(type(error), "breakdown")), []
        # A finer attempt was cut short; the one before it stands, flagged for its accuracy.
        solved, own = case.best, []
    if not solved.operator_error < _GIVE_UP:
        flags = solved.warning_flags | _BIT["not_converged"]
        return failed_record(digest, task.shape_json, task.indices, x, solved.levels, flags), own
    return replace(solved, memory_bytes=float(peak_bytes())), own


def forget_checkpoint(task: Task, digest: str) -> None:
    """Remove the checkpoint of a case whose record is kept."""
    if task.state is not None:
        (task.state / f"{digest}.npz").unlink(missing_ok=True)


class _Case:
    """One case with its attempts; `best` is the last one that was completed."""

    def __init__(
        self,
        task: Task,
        digest: str,
        x: float,
        anchors: Sequence[FieldFile],
        progress: Callable[[float, float], None],
    ) -> None:
        self._task, self._digest, self._x, self._anchors = task, digest, x, anchors
        self._began = time.perf_counter()
        self.solves = _Solves(task, digest, x, anchors, progress)
        self.best: CaseRecord | None = None

    def solve(self) -> tuple[CaseRecord, list[LevelResult]]:
        task, x = self._task, self._x
        n_max = effort.n_max(task.radii, x, task.asked.f11_relative)
        cells, longer, finer = task.cells, _LONGER_BASES, task.refinements
        while True:
            solved, own = self._attempt(cells, n_max)
            self.best = solved
            if solved.warning_flags & _BIT["truncation"] and longer:
                n_max, longer = n_max + 3, longer - 1
                # Fields of the shorter basis are of no more use.
                self.solves.by_cells.clear()
                own.clear()
            elif solved.warning_flags & _BIT["accuracy_not_met"] and finer:
                cells, finer = effort.finer_levels(task.lengths, cells), finer - 1
                if not self._affordable(cells, solved.levels):
                    return solved, own
            else:
                return solved, own

    def _affordable(self, cells: Sequence[int], before: Sequence[int]) -> bool:
        limits = self._task.limits
        fits = _fits(self._task, self._x, cells, len(self._anchors))
        # Each of the finer lattices is solved from nothing: time goes with the cells.
        growth = sum(n**3 for n in cells) / sum(n**3 for n in before)
        spent = self.solves.seconds
        return fits and spent * (1.0 + growth) <= limits.seconds

    def _attempt(self, cells: tuple[int, ...], n_max: int) -> tuple[CaseRecord, list[LevelResult]]:
        task, x, anchors, solves = self._task, self._x, self._anchors, self.solves
        if _needed(task, x, cells, len(anchors)) > task.limits.memory_bytes:
            solves.spill = task.state
        levels = [solves.get(n, n_max) for n in cells]
        # Solved again if the basis became longer on finer lattices.
        own = [solves.get(n, n_max) for n in task.cells]
        infilled = bool(anchors) and not any(lv.solution.start_dropped for lv in own)
        cold = float(np.mean([lv.solution.products for lv in own]))
        finest = lattice(task.shape, cells[-1])
        solved = combine_levels(
            levels,
            cells,
            task.shape.symmetry,
            task.indices,
            x,
            finest.spacing,
            task.asked,
            contacts=finest.contacts,
            thin=has_thin_part(task.shape, finest),
            digest=self._digest,
            shape=task.shape_json,
            start="infill" if infilled else "cold",
            products=float(np.mean(solves.products)),
            cold_products_estimate=_cold_estimate(anchors, x) if anchors else cold,
            wall_seconds=time.perf_counter() - self._began,
        )
        return solved, own


def _fits(task: Task, x: float, cells: Sequence[int], neighbours: int) -> bool:
    """Whether a case can be solved within the memory allowed, on disk in part if need be."""
    spilled = task.state is not None
    return _needed(task, x, cells, neighbours, spilled) <= task.limits.memory_bytes


def _needed(
    task: Task, x: float, cells: Sequence[int], neighbours: int, spilled: bool = False
) -> int:
    half = [float(extent) for extent in task.shape.half_extents]
    planes = sum(task.shape.is_mirrored(axis) for axis in np.eye(3))
    goal = task.asked.f11_relative
    return case_bytes(half, task.radii, planes, x, cells, goal, neighbours, spilled)


def failed_case(task: Task, digest: str, x: float, reason: str) -> CaseRecord:
    """Record of a case given up for a reason, the name of its flag."""
    return failed_record(digest, task.shape_json, task.indices, x, task.cells, _BIT[reason])


def _cold_estimate(anchors: Sequence[FieldFile], x: float) -> float:
    """Products a zero start would have used at `x`, from those the anchors around it used."""
    sizes = [anchor.size_parameter for anchor in anchors]
    return float(np.interp(x, sizes, [anchor.products for anchor in anchors]))
