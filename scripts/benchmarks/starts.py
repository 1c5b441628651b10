"""In-filled sizes: products and error of the transition matrix against anchor spacing."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from benchmarks import ladder_products
from benchmarks.irregular import irregular_polyhedron
from benchmarks.output import Result
from benchmarks.products_needed import distance, truncation
from benchmarks.solve import SHAPE
from scatterloom.campaign import effort
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solve.start import interpolated_start
from scatterloom.transition.level import LevelResult, solve_level

CELLS = 16
INDICES = (1.33 + 0.0j, 1.5 + 0.01j, 2.0 + 0.1j)
SIZES = (1.5, 3.0, 5.0)
SPACINGS = (0.1, 0.2, 0.4, 0.8)
IRREGULAR_CELLS, IRREGULAR_SIZE = 13, 3.0
IRREGULAR_INDICES = (1.05 + 0.0j, 1.33 + 0.0j, 1.6 + 0.0j)
IRREGULAR_SPACINGS = (0.2, 0.4, 0.8)
TOLERANCE = effort.operator_tolerance(0.01)
EXACT_TOLERANCE = 1e-7


def _solves(
    grid: Lattice, n_max: int, index: complex, x: float, spacings: Sequence[float], threads: int
) -> list[dict[str, Any]]:
    """Cold, and in the middle between four anchors of several spacings."""

    def solve(size: float, tolerance: float, start: Any = None, dtype: type = np.complex64) -> Any:
        return solve_level(grid, index, size, n_max, tolerance, start, dtype, threads)

    exact = solve(x, EXACT_TOLERANCE, dtype=np.complex128)
    rows = [_row(index, x, 0.0, solve(x, TOLERANCE), exact)]
    for spacing in spacings:
        sizes = [x + offset * spacing for offset in (-1.5, -0.5, 0.5, 1.5)]
        if sizes[0] <= 0.0:
            continue
        # Anchors share the truncation of the case: a job would give each its own.
        anchors = [solve(size, TOLERANCE).fields for size in sizes]
        filled = solve(x, TOLERANCE, interpolated_start(anchors, x))
        rows.append(_row(index, x, spacing, filled, exact))
    return rows


def run(threads: int) -> Result:
    """Fill in sizes of a spheroid and of a particle without symmetry, and a long ladder."""
    shape = from_spec(SHAPE)
    grid = lattice(shape, CELLS)
    rows: list[dict[str, Any]] = []
    for index in INDICES:
        for x in SIZES:
            rows += _solves(grid, truncation(shape, x), index, x, SPACINGS, threads)
    body = irregular_polyhedron()
    bare = lattice(body, IRREGULAR_CELLS)
    irregular: list[dict[str, Any]] = []
    for index in IRREGULAR_INDICES:
        n_max = truncation(body, IRREGULAR_SIZE)
        irregular += _solves(bare, n_max, index, IRREGULAR_SIZE, IRREGULAR_SPACINGS, threads)
    chosen = ", ".join(f"{effort.anchor_step(m, 3.0):.2f} for m = {_named(m)}" for m in INDICES)
    low = ", ".join(f"{effort.anchor_step(m, 3.0):.2f}" for m in IRREGULAR_INDICES)
    return Result(
        rows,
        [
            f"First table: oblate spheroid 2:1, {CELLS} cells across; spacing 0 is the cold block.",
            "Second table: the convex hull of random points, without any symmetry, "
            f"{IRREGULAR_CELLS} cells across; campaigns space its anchors by {low}.",
            f"Solved to a relative error of {TOLERANCE:g} by the solver's own estimate; the error "
            f"shown is against a solve in double precision to {EXACT_TOLERANCE:g}.",
            f"Spacings that campaigns use: {chosen}.",
            *ladder_products.notes(),
        ],
        lambda path: _draw(path, rows, irregular),
        more={
            "a particle without symmetry": irregular,
            "a ladder of ratio 1.02": ladder_products.measure(threads),
        },
    )


def _named(index: complex) -> str:
    return f"{index.real:g}+{index.imag:g}i" if index.imag else f"{index.real:g}"


def _row(
    index: complex, x: float, spacing: float, result: LevelResult, exact: LevelResult
) -> dict[str, Any]:
    return {
        "index": _named(index),
        "size_parameter": x,
        "spacing": spacing,
        "products_per_wave": result.solution.products,
        "packed_products": result.solution.packed_products,
        "start_residual": result.solution.start_residual,
        "start_dropped": result.solution.start_dropped,
        "estimated_error": result.solution.error,
        "true_error": distance(result, exact),
    }


def _draw(path: Path, rows: list[dict[str, Any]], irregular: list[dict[str, Any]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, len(INDICES) + 1, figsize=(13, 3.8), sharey=True)
    looks = list(zip("osD", ("-", "--", ":"), strict=True))
    for ax, index in zip(axes, INDICES, strict=False):
        for x, look in zip(SIZES, looks, strict=True):
            mine = [r for r in rows if r["index"] == _named(index) and r["size_parameter"] == x]
            _curve(ax, mine, f"x = {x:g}", look)
        ax.axvline(effort.anchor_step(index, 3.0), color="0.7", linewidth=1)
        ax.set_title(f"oblate, m = {_named(index)}")
    for index, look in zip(IRREGULAR_INDICES, looks, strict=True):
        mine = [r for r in irregular if r["index"] == _named(index)]
        _curve(axes[-1], mine, f"m = {_named(index)}", look)
    axes[-1].set_title(f"irregular, x = {IRREGULAR_SIZE:g}")
    axes[-1].legend()
    for ax in axes:
        ax.set_xlabel("anchor spacing in size parameter")
    axes[0].set_ylabel("products per wave")
    axes[0].set_ylim(bottom=0)
    axes[0].legend()
    figure.text(
        0.5, 0.01,
        "Lines: size in the middle between four anchors. Single marks at the right: solved cold. "
        "Grey: spacing that campaigns use.",
        ha="center", fontsize=8,
    )  # fmt: skip
    figure.tight_layout(rect=(0, 0.04, 1, 1))
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)


def _curve(ax: Any, mine: list[dict[str, Any]], label: str, look: tuple[str, str]) -> None:
    marker, style = look
    filled = [r for r in mine if r["spacing"] > 0]
    at, height = [r["spacing"] for r in filled], [r["products_per_wave"] for r in filled]
    (line,) = ax.plot(at, height, marker=marker, linestyle=style, label=label)
    cold = next(r for r in mine if r["spacing"] == 0)
    ax.plot(1.15, cold["products_per_wave"], marker=marker, color=line.get_color())
