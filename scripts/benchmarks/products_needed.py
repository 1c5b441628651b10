"""Products that a cold block solve needs, by the symmetry that it may use."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from benchmarks.irregular import irregular_polyhedron
from scatterloom.campaign import effort
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import Shape, from_spec
from scatterloom.transition.level import LevelResult, solve_level

INDEX, SIZE_PARAMETER, CELLS = 1.5 + 0.0j, 5.0, 16
TOLERANCE, EXACT_TOLERANCE = 1e-4, 1e-7


def distance(result: LevelResult, exact: LevelResult) -> float:
    """Relative error (Frobenius) of a transition matrix."""
    off = result.transition.matrix - exact.transition.matrix
    return float(np.linalg.norm(off) / np.linalg.norm(exact.transition.matrix))


def truncation(shape: Shape, x: float) -> int:
    """Degree at which a campaign truncates the waves."""
    return effort.n_max((*shape.half_extents, shape.circumscribed_radius), x)


def _row(name: str, grid: Lattice, n_max: int, threads: int) -> dict[str, Any]:
    exact = solve_level(
        grid, INDEX, SIZE_PARAMETER, n_max, EXACT_TOLERANCE, None, np.complex128, threads
    )
    found = solve_level(grid, INDEX, SIZE_PARAMETER, n_max, TOLERANCE, threads=threads)
    waves = len(found.transition.labels.kind)
    return {
        "particle": name,
        "mirror_planes_used": sum(grid.mirrors),
        "waves": waves,
        "products_per_wave": found.solution.products,
        "packed_products": found.solution.packed_products,
        "packed_products_per_wave": found.solution.packed_products / waves,
        "estimated_error": found.solution.error,
        "true_error": distance(found, exact),
    }


def measure(threads: int) -> list[dict[str, Any]]:
    """One row for each particle."""
    rows = []
    for name, spec in (
        ("sphere", {"kind": "sphere"}),
        ("oblate 2:1", {"kind": "spheroid", "equatorial_to_polar": 2.0}),
    ):
        shape = from_spec(spec)
        grid = lattice(shape, CELLS)
        n_max = truncation(shape, SIZE_PARAMETER)
        rows.append(_row(name, grid, n_max, threads))
        bare = replace(grid, mirrors=(False, False, False))
        rows.append(_row(name, bare, n_max, threads))
    shape = irregular_polyhedron()
    n_max = truncation(shape, SIZE_PARAMETER)
    rows.append(_row("irregular", lattice(shape, CELLS), n_max, threads))
    return rows
