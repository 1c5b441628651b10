"""A particle without symmetry: the same ways as for the spheroid, against finer lattices."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import lebedev_rule
from scipy.spatial.transform import Rotation

from benchmarks.accuracy import ANGLES_DEG, errors
from benchmarks.cases import record_of, solve_case
from benchmarks.irregular import CORNERS, SEED, STRETCH, irregular_polyhedron
from benchmarks.reference import staircase
from benchmarks.ways import (
    Problem,
    cold_and_filled,
    compared,
    extrapolated,
    ladder,
    textbook,
)
from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import Faceted
from scatterloom.scattering.record import CaseRecord

INDEX, SIZE_PARAMETER = 1.5 + 0.01j, 3.0
REFERENCE_CELLS = (16, 24, 32)
FINEST = 48
"""Cells across the finest lattice of the reference."""

TURNED_FINEST = 40
LEBEDEV_DEGREE = 15  # 86 directions; more of them change ratios by 0.0002 at 12 cells
ROUNDS = 3


@dataclass(frozen=True)
class _Found:
    """A record in the place of an exact solution."""

    record: CaseRecord

    @property
    def extinction_efficiency(self) -> float:
        return self.record.scalars["extinction_efficiency"][0]

    def scattering_matrix(self, angles_deg: Any) -> NDArray[np.float64]:
        return self.record.scattering_matrix(angles_deg)[0]


@lru_cache(maxsize=8)
def fine(x: float, finest: int = FINEST, turned: bool = False) -> _Found:
    """Three lattices up to `finest` cells across, extrapolated; `turned` against the particle."""
    shape = irregular_polyhedron()
    longest = float(shape.half_extents.max())
    cells = effort.aligned_levels(finest, tuple(float(h) / longest for h in shape.half_extents))
    turn = Rotation.random(random_state=SEED).as_matrix() if turned else None
    lattices = [lattice(shape, n, turn) for n in cells]
    levels = solve_case(shape, lattices, INDEX, x)
    return _Found(record_of(shape, cells, lattices, INDEX, x, levels))


def _inside(shape: Faceted, points: NDArray[np.float64]) -> NDArray[np.bool_]:
    normals, distances = shape.body.planes
    out: NDArray[np.bool_] = np.all(points @ normals.T <= distances, axis=1)
    return out


def _turned_row(x: float) -> dict[str, Any]:
    """How far the reference is from one on lattices turned against the particle."""
    found = fine(x, TURNED_FINEST, turned=True)
    matrix = found.scattering_matrix(ANGLES_DEG)
    return {
        "way": "turned lattices",
        "cells_across": "+".join(str(n) for n in found.record.levels),
        "waves": found.record.wave_count,
        **dict.fromkeys(
            ("products_per_wave", "packed_products", "seconds", "seconds_solving"), None
        ),
        **errors(found.extinction_efficiency, matrix, fine(x)),
    }


def measure(threads: int) -> tuple[list[dict[str, Any]], Sequence[str]]:
    """Rows and notes for the particle without symmetry."""
    shape = irregular_polyhedron()
    problem = Problem(shape, INDEX, fine)
    lattices = [lattice(shape, n) for n in problem.cells(SIZE_PARAMETER)]
    rows = cold_and_filled(problem, SIZE_PARAMETER, lattices, ROUNDS, threads)
    rows.append(ladder(problem, 2, threads))
    point, weight = lebedev_rule(LEBEDEV_DEGREE)
    rule = (point.T, weight / weight.sum())
    classic = []
    for n in REFERENCE_CELLS:
        stairs = staircase(shape.half_extents, n, lambda at: _inside(shape, at))
        classic.append(textbook(problem, SIZE_PARAMETER, stairs, n, rule, False, threads))
    rows = compared([*rows, *classic, extrapolated(classic)])
    check = _turned_row(SIZE_PARAMETER)
    check["times faster than textbook"] = None
    reference = "+".join(str(n) for n in fine(SIZE_PARAMETER).record.levels)
    return [*rows, check], [
        f"The particle without symmetry is the convex hull of {CORNERS} random points (seed "
        f"{SEED}) on an ellipsoid of half axes {STRETCH[0]:g}, {STRETCH[1]:g}, {STRETCH[2]:g}. "
        f"Errors are against lattices of {reference} cells across, extrapolated; the row 'turned "
        "lattices' shows what an independent set of lattices, turned against the particle, makes "
        "of it.",
        f"Its textbook rule has {len(rule[0])} directions, none of which another one stands for, "
        "solved in two polarizations each; more of them change ratios by 0.0002 (12 cells across).",
    ]
