"""The lattice product, per incident wave: ours, the textbook way, and its bare transforms."""

from __future__ import annotations

from collections.abc import Callable

import ducc0
import numpy as np

from benchmarks.output import Result
from benchmarks.reference import PointDipoles, staircase
from benchmarks.timing import in_turns, median_ratio
from scatterloom.dipole.polarizability import cell_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

CELLS = (16, 24, 32, 48)
INDEX = 1.5 + 0.01j
SIZE_PARAMETER = 3.0
PACKED = 8
"""Waves of each parity class in one call."""


def bare_transforms(matrix: LatticeMatrix, batch: int) -> Callable[[], None]:
    """The transforms of one packed product of `batch` waves and nothing else.

    The same passes over arrays of the same shapes: x on the box's columns, then for every x
    plane y and z, there and back.
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


def run(threads: int) -> Result:
    """Time one product of a sphere in cubic boxes; the box is as many cells wide as stated."""
    rows = []
    random = np.random.default_rng(2)
    shape = from_spec({"kind": "sphere"})
    for cells in CELLS:
        grid = lattice(shape, cells)
        kd = SIZE_PARAMETER * grid.spacing
        tensors = cell_tensors(grid.fill, grid.normal, INDEX, kd, grid.area)
        matrix = LatticeMatrix(grid, tensors, kd, threads=threads)
        size = (matrix.n_class, PACKED, 3, matrix.n_cell)
        waves = (random.standard_normal(size) + 1j * random.standard_normal(size)).astype(
            matrix.dtype
        )
        cell, spacing = staircase(shape.half_axes, cells)
        textbook = PointDipoles(cell, SIZE_PARAMETER * spacing, threads)
        dipoles = random.standard_normal((3, len(cell))) + 0j
        passes = bare_transforms(matrix, PACKED)
        seconds = in_turns(
            {
                "ours": lambda matrix=matrix, waves=waves: matrix(waves),
                "floor": passes,
                "textbook": lambda textbook=textbook, dipoles=dipoles: textbook.interaction(
                    dipoles
                ),
            },
            rounds=5,
        )
        per_wave = matrix.n_class * PACKED
        ratio = median_ratio(seconds["textbook"], seconds["ours"])
        rows.append(
            {
                "cells": cells,
                "textbook_ms_per_wave": 1e3 * float(np.median(seconds["textbook"])),
                "ours_ms_per_packed_product": 1e3 * float(np.median(seconds["ours"])) / PACKED,
                "ours_ms_per_wave": 1e3 * float(np.median(seconds["ours"])) / per_wave,
                "textbook / ours, packed": ratio * PACKED,
                "textbook / ours, wave": ratio * per_wave,
                "ours / bare transforms": median_ratio(seconds["ours"], seconds["floor"]),
            }
        )
    return Result(
        rows,
        [
            f"A sphere; cells across it as stated; {matrix.n_class} parity classes, so that one "
            f"packed product serves {matrix.n_class} waves.",
            "Ours is in single precision (the solver's choice), the textbook way in double.",
            "'bare transforms' are the same transforms on the same arrays without laying out, "
            "multiplying by the kernel and taking apart: a floor for this layout of the work.",
        ],
    )
