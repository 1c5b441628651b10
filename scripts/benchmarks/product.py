"""The lattice product, per incident wave: ours, the textbook way, and its bare transforms."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import ducc0
import numpy as np

from benchmarks.output import Result
from benchmarks.reference import PointDipoles, staircase
from benchmarks.timing import in_turns, median_ratio
from scatterloom.dipole.polarizability import cell_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

CELLS = (24, 32, 64, 128)
TEXTBOOK_CELLS = 64
"""Largest box for the textbook way, which would take some 6 GB on the next one."""

INDEX = 1.5 + 0.01j
SIZE_PARAMETER = 3.0
PACKED = 10
"""Waves of each parity class in one call; half as many in the largest box."""


def bare_transforms(matrix: LatticeMatrix, batch: int) -> Callable[[], None]:
    """A library's transforms for one packed product of `batch` waves and nothing else.

    Pruned passes that transform no known zero: x on the box's columns, then for every x plane
    y and z on padded arrays, there and back.
    """
    _, ny, nz = matrix.box
    px, py, pz = (2 * h for h in matrix.half)
    dtype, threads, c2c = matrix.dtype, matrix.threads, ducc0.fft.c2c
    grid = np.zeros((batch, 3, px, ny, nz), dtype=dtype)
    column = np.zeros((batch, 3, py, nz), dtype=dtype)
    plane = np.zeros((batch, 3, py, pz), dtype=dtype)

    def passes() -> None:
        c2c(grid, [2], True, 0, grid, threads)
        for _ in range(px):
            c2c(column, [2], True, 0, column, threads)
            c2c(plane, [3], True, 0, plane, threads)
            c2c(plane, [3], False, 0, plane, threads)
            c2c(column, [2], False, 0, column, threads)
        c2c(grid, [2], False, 0, grid, threads)

    return passes


def run(threads: int, short: bool = False) -> Result:
    """Time one product of a sphere in cubic boxes; the box is as many cells wide as stated."""
    rows = []
    random = np.random.default_rng(2)
    shape = from_spec({"kind": "sphere"})
    for cells in CELLS[: 1 if short else None]:
        grid = lattice(shape, cells)
        kd = SIZE_PARAMETER * grid.spacing
        tensors = cell_tensors(grid.fill, grid.normal, INDEX, kd, grid.area)
        matrix = LatticeMatrix(grid, tensors, kd, threads=threads)
        packed = PACKED if cells <= TEXTBOOK_CELLS else PACKED // 2
        size = (matrix.n_class, packed, 3, matrix.n_cell)
        waves = random.standard_normal(size, dtype=np.float32).astype(matrix.dtype)
        out = np.empty_like(waves)
        floor = packed if cells <= TEXTBOOK_CELLS else 1
        passes = bare_transforms(matrix, floor)
        rivals: dict[str, Callable[[], object]] = {
            "ours": lambda matrix=matrix, waves=waves, out=out: matrix(waves, out),
            "floor": passes,
        }
        if cells <= TEXTBOOK_CELLS:
            cell, spacing = staircase(shape.half_axes, cells)
            textbook = PointDipoles(cell, SIZE_PARAMETER * spacing, threads)
            dipoles = random.standard_normal((3, len(cell))) + 0j
            rivals["textbook"] = lambda textbook=textbook, dipoles=dipoles: textbook.interaction(
                dipoles
            )
        seconds = in_turns(rivals, rounds=5 if cells <= 32 else 3)
        per_wave = matrix.n_class * packed
        median = {name: 1e3 * float(np.median(times)) for name, times in seconds.items()}
        known = "textbook" in seconds
        ratio = median_ratio(seconds["textbook"], seconds["ours"]) if known else None
        rows.append(
            {
                "cells": cells,
                "textbook_ms_per_wave": median.get("textbook"),
                "ours_ms_per_packed_product": median["ours"] / packed,
                "ours_ms_per_wave": median["ours"] / per_wave,
                "textbook / ours, packed": None if ratio is None else ratio * packed,
                "textbook / ours, wave": None if ratio is None else ratio * per_wave,
                "ours / library transforms": median_ratio(seconds["ours"], seconds["floor"])
                * floor
                / packed,
                "work_space_MB": matrix.nbytes / 1e6,
            }
        )
    return Result(
        rows,
        [
            f"A sphere; cells across it as stated; {matrix.n_class} parity classes, so that one "
            f"packed product serves {matrix.n_class} waves.",
            "Ours is in single precision (the solver's choice), the textbook way in double.",
            "'library transforms' are the transforms alone, by ducc0 on padded planes, without "
            "laying out, multiplying by the kernel and taking apart: the least that a product "
            "built on them could take.",
            "'work space' is the kernel, the cell tensors and the box of five waves.",
        ],
        lambda path: _draw(path, rows),
    )


def _draw(path: Path, rows: list[dict[str, Any]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, ax = plt.subplots(figsize=(6, 3.6))
    known = [row for row in rows if row["textbook_ms_per_wave"] is not None]
    lines = (
        (known, "textbook_ms_per_wave", "textbook", "s--", "#c04a00"),
        (rows, "ours_ms_per_packed_product", "ours, a packed product", "o-", "#0058a3"),
        (rows, "ours_ms_per_wave", "ours, a wave", "^:", "#00704f"),
    )
    for part, key, label, style, colour in lines:
        ax.loglog(
            [r["cells"] for r in part], [r[key] for r in part], style, color=colour, label=label
        )
    cells = [row["cells"] for row in rows]
    ax.set_xticks(cells, [str(n) for n in cells])
    ax.minorticks_off()
    ax.set_xlabel("cells across")
    ax.set_ylabel("ms")
    ax.legend()
    figure.tight_layout()
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
