"""In-filled sizes: products and error of the transition matrix against anchor spacing."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from benchmarks.output import Result
from benchmarks.solve import SHAPE
from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solve.start import interpolated_start
from scatterloom.transition.level import LevelResult, solve_level

CELLS = 16
INDICES = (1.33 + 0.0j, 1.5 + 0.01j, 2.0 + 0.1j)
SIZES = (1.5, 3.0, 5.0)
SPACINGS = (0.1, 0.2, 0.4, 0.8)
TOLERANCE = effort.operator_tolerance(0.01)
EXACT_TOLERANCE = 1e-7


def _error(result: LevelResult, exact: LevelResult) -> float:
    difference = result.transition.matrix - exact.transition.matrix
    return float(np.linalg.norm(difference) / np.linalg.norm(exact.transition.matrix))


def run(threads: int) -> Result:
    """Fill in the middle between four anchors of several spacings."""
    shape = from_spec(SHAPE)
    grid = lattice(shape, CELLS)
    rows: list[dict[str, Any]] = []
    for index in INDICES:
        for x in SIZES:
            n_max = effort.n_max(tuple(shape.half_axes), x)

            def solve(
                size: float,
                tolerance: float,
                start: Any = None,
                dtype: type = np.complex64,
                index: complex = index,
                n_max: int = n_max,
            ) -> LevelResult:
                return solve_level(grid, index, size, n_max, tolerance, start, dtype, threads)

            exact = solve(x, EXACT_TOLERANCE, dtype=np.complex128)
            cold = solve(x, TOLERANCE)
            rows.append(_row(index, x, 0.0, cold, exact))
            for spacing in SPACINGS:
                sizes = [x + offset * spacing for offset in (-1.5, -0.5, 0.5, 1.5)]
                if sizes[0] <= 0.0:
                    continue
                # Anchors share the truncation of the case: a job would give each its own.
                anchors = [solve(size, TOLERANCE).fields for size in sizes]
                filled = solve(x, TOLERANCE, interpolated_start(anchors, x))
                rows.append(_row(index, x, spacing, filled, exact))
    chosen = ", ".join(f"{effort.anchor_step(m, 3.0):.2f} for m = {_named(m)}" for m in INDICES)
    return Result(
        rows,
        [
            f"Oblate spheroid 2:1, {CELLS} cells across; spacing 0 is the cold block.",
            f"Solved to a relative error of {TOLERANCE:g} by the solver's own estimate; the error "
            f"shown is against a solve in double precision to {EXACT_TOLERANCE:g}.",
            f"Spacings that campaigns use: {chosen}.",
        ],
        lambda path: _draw(path, rows),
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
        "true_error": _error(result, exact),
    }


def _draw(path: Path, rows: list[dict[str, Any]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, len(INDICES), figsize=(10, 3.6), sharey=True)
    for ax, index in zip(axes, INDICES, strict=True):
        for x, marker, style in zip(SIZES, "osD", ("-", "--", ":"), strict=True):
            mine = [r for r in rows if r["index"] == _named(index) and r["size_parameter"] == x]
            filled = [r for r in mine if r["spacing"] > 0]
            (line,) = ax.plot(
                [r["spacing"] for r in filled],
                [r["products_per_wave"] for r in filled],
                marker=marker,
                linestyle=style,
                label=f"x = {x:g}",
            )
            cold = next(r for r in mine if r["spacing"] == 0)
            ax.plot(1.15, cold["products_per_wave"], marker=marker, color=line.get_color())
        ax.axvline(effort.anchor_step(index, 3.0), color="0.7", linewidth=1)
        ax.set_title(f"m = {_named(index)}")
        ax.set_xlabel("spacing of anchors in size parameter")
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
