"""How the time grows with cells, with waves and with sizes, and what a second core gives."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from benchmarks.cases import ASKED, record_of, solve_case
from benchmarks.output import Result
from benchmarks.timing import in_turns, median_ratio
from scatterloom.campaign import effort
from scatterloom.dipole.mixture import particle_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

CELLS = (16, 24, 32, 48, 64, 96)
SIZES = (1.0, 2.0, 3.0, 4.0, 6.0)
LADDERS = (4, 8, 16, 32)
INDEX = 1.5 + 0.01j
OBLATE = {"kind": "spheroid", "equatorial_to_polar": 2.0}
ROUNDS = 3


def _matrix(cells: int, threads: int) -> tuple[LatticeMatrix, np.ndarray]:
    grid = lattice(from_spec({"kind": "sphere"}), cells)
    kd = 3.0 * grid.spacing
    matrix = LatticeMatrix(grid, particle_tensors(grid, [INDEX], kd), kd, threads=threads)
    random = np.random.default_rng(1)
    shape = (matrix.n_class, 5, 3, matrix.n_cell)
    return matrix, random.standard_normal(shape, dtype=np.float32).astype(matrix.dtype)


def _by_cells(cells: Sequence[int]) -> list[dict[str, Any]]:
    rows = []
    for n in cells:
        rivals: dict[str, Callable[[], object]] = {}
        for threads in (1, 2):
            matrix, waves = _matrix(n, threads)
            rivals[str(threads)] = lambda matrix=matrix, waves=waves: matrix(waves)
        seconds = in_turns(rivals, ROUNDS)
        rows.append(
            {
                "cells across": n,
                "ms a packed product, 1 core": 200.0 * float(np.median(seconds["1"])),
                "gain by a second core": median_ratio(seconds["1"], seconds["2"]),
            }
        )
    return rows


def _by_size(sizes: Sequence[float], threads: int) -> list[dict[str, Any]]:
    shape = from_spec(OBLATE)
    rows = []
    for x in sizes:
        cells = effort.levels(tuple(shape.half_extents), INDEX, x, ASKED.f11_relative)
        lattices = [lattice(shape, n) for n in cells]
        solve_case(shape, lattices[:1], INDEX, x, (), threads)
        solving, averaging = [], []
        for _ in range(ROUNDS):
            begun = time.perf_counter()
            levels = solve_case(shape, lattices, INDEX, x, (), threads)
            solved = time.perf_counter()
            record = record_of(shape, cells, lattices, INDEX, x, levels)
            solving.append(solved - begun)
            averaging.append(time.perf_counter() - solved)
        rows.append(
            {
                "size parameter": x,
                "cells across, finest": cells[-1],
                "waves": record.wave_count,
                "seconds solving": float(np.median(solving)),
                "averaging, percent of it": 100.0 * median_ratio(averaging, solving),
                "predicted seconds": effort.cost(tuple(shape.half_extents), INDEX, x, True),
            }
        )
    return rows


def _by_ladder(counts: Sequence[int], threads: int) -> list[dict[str, Any]]:
    """Time per size of ladders over the same range, cold and with anchors."""
    shape = from_spec(OBLATE)
    cells = effort.levels(tuple(shape.half_extents), INDEX, 3.0, ASKED.f11_relative)
    lattices = [lattice(shape, n) for n in cells]
    step = effort.anchor_step(INDEX, 3.0)
    ends = (2.7, 2.7 + 2.0 * step)
    rows = []
    for count in counts:
        spent = {}
        for way in ("cold", "with anchors"):
            begun = time.perf_counter()
            anchors: list[Any] = []
            if way == "with anchors":
                for x in np.linspace(*ends, 3):
                    anchors.append(solve_case(shape, lattices, INDEX, float(x), (), threads))
            for x in np.linspace(*ends, count + 2)[1:-1]:
                solve_case(shape, lattices, INDEX, float(x), anchors, threads)
            spent[way] = (time.perf_counter() - begun) / (count + len(anchors))
        rows.append(
            {
                "sizes between three anchors": count,
                "ms a size, cold": 1e3 * spent["cold"],
                "ms a size, anchors included": 1e3 * spent["with anchors"],
            }
        )
    return rows


def run(threads: int, short: bool = False) -> Result:
    """Measure; the short way takes the first entries only, to see that it runs."""
    take = 2 if short else None
    cells = _by_cells(CELLS[:take])
    sizes = _by_size(SIZES[:take], threads)
    ladders = _by_ladder(LADDERS[: 1 if short else None], threads)
    return Result(
        cells,
        [
            "First table: five packed products of a sphere with three mirror planes (eight waves "
            "each), on one core and on two, in turns.",
            "Oblate spheroid 2:1, m = 1.5+0.01i, three lattices as the program has them, solved "
            "from nothing; 'averaging' is everything from transition matrices to the record.",
            "Ladders: sizes evenly between size parameters 2.7 and "
            f"{2.7 + 2.0 * effort.anchor_step(INDEX, 3.0):.2f}, on the lattices of x = 3.",
        ],
        lambda path: _draw(path, cells, sizes),
        {"By size parameter": sizes, "By sizes of a ladder": ladders},
    )


def _draw(path: Path, cells: list[dict[str, Any]], sizes: list[dict[str, Any]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, 2, figsize=(9, 3.6))
    n = [row["cells across"] for row in cells]
    one = np.array([row["ms a packed product, 1 core"] for row in cells])
    two = one / [row["gain by a second core"] for row in cells]
    axes[0].loglog(n, one, "o-", color="#0058a3", label="one core")
    axes[0].loglog(n, two, "s--", color="#c04a00", label="two cores")
    axes[0].loglog(n, one[-1] * (np.array(n) / n[-1]) ** 3.0, ":", color="0.5", label="cells")
    axes[0].set_xlabel("cells across")
    axes[0].set_ylabel("ms a packed product")
    axes[0].set_xticks(n, [str(v) for v in n])
    axes[0].minorticks_off()
    axes[0].legend()
    x = [row["size parameter"] for row in sizes]
    solved = [row["seconds solving"] for row in sizes]
    axes[1].loglog(x, solved, "o-", color="#0058a3", label="solved")
    axes[1].loglog(
        x, [row["predicted seconds"] for row in sizes], "^:", color="#00704f", label="predicted"
    )
    axes[1].set_xlabel("size parameter")
    axes[1].set_ylabel("seconds")
    axes[1].set_xticks(x, [f"{v:g}" for v in x])
    axes[1].minorticks_off()
    axes[1].legend()
    figure.tight_layout()
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
