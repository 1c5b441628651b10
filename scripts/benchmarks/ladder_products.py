"""Products of a long ladder of sizes: filled in between anchors, cold, one wave at a time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator, gmres

from benchmarks.products_needed import distance, truncation
from benchmarks.random_average import transverse
from benchmarks.ways import Sized, anchors_of
from scatterloom.dipole.mixture import particle_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solve.start import interpolated_start, nearest
from scatterloom.transition.level import LevelResult, solve_level

SPEC = {"kind": "spheroid", "equatorial_to_polar": 2.0}
INDEX, CELLS = 1.5 + 0.01j, 24
LADDER, RATIO = (1.0, 6.0), 1.02
TOLERANCE, EXACT_TOLERANCE = 1e-3, 1e-5
GOALS = {"one at a time": 0.08, "cold blocks": 0.5}

EVERY = 9
"""One size in so many is solved by single plane waves."""

DIRECTIONS = np.array([[0.0, 0.0, 1.0], [1.0, 0.0, 0.0], [0.48, 0.6, 0.64]])


def ladder_sizes() -> list[float]:
    """Sizes from one end of the ladder to the other."""
    count = int(np.log(LADDER[1] / LADDER[0]) / np.log(RATIO) + 1e-9) + 1
    return [float(x) for x in LADDER[0] * RATIO ** np.arange(count)]


def plane_wave_products(grid: Lattice, x: float, threads: int) -> float:
    """Mean products of single plane waves from zero to a relative residual of `TOLERANCE`."""
    bare = replace(grid, mirrors=(False, False, False))
    kd = x * grid.spacing
    matrix = LatticeMatrix(bare, particle_tensors(bare, [INDEX], kd), kd, np.complex128, threads)
    at = x * bare.centre()
    r = matrix.root
    root = np.array([[r[0], r[3], r[4]], [r[3], r[1], r[5]], [r[4], r[5], r[2]]])

    def multiply(vector: NDArray) -> NDArray:
        return matrix(np.ascontiguousarray(vector.reshape(1, 1, 3, matrix.n_cell))).ravel()

    size = 3 * matrix.n_cell
    operator = LinearOperator((size, size), matvec=multiply, dtype=np.complex128)
    waves = 0
    for direction in DIRECTIONS:
        for polarization in transverse(direction):
            goal = np.einsum("pqc,q->pc", root, polarization) * np.exp(1j * (at @ direction))
            _, code = gmres(operator, goal.ravel(), rtol=TOLERANCE, restart=300, maxiter=1)
            if code != 0:
                raise RuntimeError("gmres did not converge in 300 steps")
            waves += 1
    return matrix.products / waves


def _filled(
    grid: Lattice, sizes: Sequence[float], chosen: set[float], threads: int
) -> dict[float, LevelResult]:
    """The ladder as a campaign solves it: anchors cold, the others from the nearest of them."""
    shape = from_spec(SPEC)
    found: dict[float, LevelResult] = {}
    anchors: list[Sized] = []
    for x in [*sorted(chosen), *(x for x in sizes if x not in chosen)]:
        around = [] if x in chosen else [a.levels[0].fields for a in nearest(anchors, x)]
        start = interpolated_start(around, x) if around else None
        found[x] = solve_level(
            grid, INDEX, x, truncation(shape, x), TOLERANCE, start, threads=threads
        )
        if x in chosen:
            anchors.append(Sized([found[x]]))
    return found


def measure(threads: int) -> list[dict[str, Any]]:
    """One row for each way."""
    shape = from_spec(SPEC)
    grid = lattice(shape, CELLS)
    sizes = ladder_sizes()
    waves = {x: 2 * truncation(shape, x) * (truncation(shape, x) + 2) for x in sizes}
    some = sizes[::EVERY]
    single = np.interp(sizes, some, [plane_wave_products(grid, x, threads) for x in some])
    chosen = anchors_of(INDEX, sizes)
    ladder = _filled(grid, sizes, chosen, threads)
    cold, errors = {}, {"cold": [], "ladder": []}
    for x in sizes:
        n_max = truncation(shape, x)
        cold[x] = solve_level(grid, INDEX, x, n_max, TOLERANCE, threads=threads)
        exact = solve_level(grid, INDEX, x, n_max, EXACT_TOLERANCE, threads=threads)
        errors["cold"].append(distance(cold[x], exact))
        errors["ladder"].append(distance(ladder[x], exact))

    def total(found: dict[float, LevelResult], over: Sequence[float]) -> float:
        return sum(waves[x] * found[x].solution.products for x in over)

    between = [x for x in sizes if x not in chosen]
    one_at_a_time = dict(zip(sizes, single, strict=True))
    rows = []
    for way, over, products, off in (
        ("plane waves, one at a time", sizes, None, None),
        ("cold blocks", sizes, cold, errors["cold"]),
        (f"ladder, its {len(chosen)} anchors included", sizes, ladder, errors["ladder"]),
        ("sizes between anchors", between, ladder, None),
    ):
        rivals = sum(waves[x] * one_at_a_time[x] for x in over)
        used = rivals if products is None else total(products, over)
        count = sum(waves[x] for x in over)
        rows.append(
            {
                "way": way,
                "sizes": len(over),
                "products_per_wave": used / count,
                "over one at a time": used / rivals,
                "over cold blocks": used / total(cold, over),
                "largest_true_error": None if off is None else max(off),
                "sizes_within_1e-3": None if off is None else int(np.sum(np.array(off) <= 1e-3)),
            }
        )
    return rows


def notes() -> list[str]:
    """What a reader must know of the table."""
    return [
        f"Ladder: oblate spheroid 2:1, m = 1.5+0.01i, {CELLS} cells across, sizes from "
        f"{LADDER[0]:g} to {LADDER[1]:g} at a ratio of {RATIO:g}, operator error {TOLERANCE:g}, "
        f"anchors as far apart as in campaigns. Goals: {GOALS['one at a time']:g} of plane waves "
        f"one at a time, {GOALS['cold blocks']:g} of cold blocks. Products are waves multiplied "
        "by the matrix; symmetry saves the same share of both, hence is left out.",
        "One at a time: generalized minimal residuals without restart from zero to a relative "
        f"residual of {TOLERANCE:g}, mean of {2 * len(DIRECTIONS)} waves, at one size in {EVERY} "
        "and interpolated between; as many waves as the basis has. True errors are those of the "
        f"transition matrix against a solve to {EXACT_TOLERANCE:g}.",
    ]
