"""One plane wave at a time: products by the field that the iteration starts from.

What a scientist would try first. The starts of the block solver are in `starts`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.linalg import LinearOperator, gmres

from benchmarks.irregular import irregular_polyhedron
from benchmarks.output import Result
from scatterloom.dipole.mixture import particle_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import Faceted, Shape, from_spec

SHAPES: Mapping[str, Shape] = {
    "sphere": from_spec({"kind": "sphere"}),
    "oblate 2:1": from_spec({"kind": "spheroid", "equatorial_to_polar": 2.0}),
    "irregular": irregular_polyhedron(),
}
INDICES = (1.05 + 0.0j, 1.33 + 0.0j, 1.6 + 0.0j)
SIZES = (2.0, 5.0)
CELLS = 20
RATIO = 1.02
"""Of neighbouring sizes, for the starts from solved ones."""

TOLERANCE = 1e-4
RESTART = 300
STARTS = ("zero", "plane wave", "straight rays", "one-sided", "two-sided")


class _Wave:
    """A plane wave along z, polarized along x, on a particle of one size."""

    def __init__(self, shape: Shape, index: complex, x: float, threads: int) -> None:
        cells = replace(lattice(shape, CELLS), mirrors=(False, False, False))
        kd = x * cells.spacing
        tensors = particle_tensors(cells, [index], kd)
        self.matrix = LatticeMatrix(cells, tensors, kd, np.complex128, threads)
        at = x * cells.centre()
        path = x * np.clip(at[:, 2] / x - _entry(shape, at[:, :2] / x), 0.0, None)
        root = self.matrix.root
        across = np.stack([root[0], root[3], root[4]])
        self.incident = across * np.exp(1j * at[:, 2])
        # A straight ray through the particle.
        self.phase = np.exp(1j * (at[:, 2] + (index - 1.0) * path))
        self.rays = across * self.phase

    def solve(self, start: NDArray[np.complex128]) -> tuple[NDArray[np.complex128], int, float]:
        """Solution, products and relative residual of the start."""
        matrix, n = self.matrix, self.matrix.n_cell

        def multiply(vector: NDArray) -> NDArray:
            waves = np.ascontiguousarray(vector.reshape(1, 1, 3, n), dtype=np.complex128)
            return matrix(waves).ravel()

        goal = self.incident.ravel()
        scale = float(np.linalg.norm(goal))
        first = float(np.linalg.norm(goal - multiply(start.ravel()))) / scale
        before = matrix.products
        operator = LinearOperator((goal.size, goal.size), matvec=multiply, dtype=np.complex128)
        found, code = gmres(
            operator, goal, x0=start.ravel(), rtol=TOLERANCE, restart=RESTART, maxiter=1
        )
        if code != 0:
            raise RuntimeError(f"gmres did not converge in {RESTART} steps")
        return found.reshape(3, n), matrix.products - before, first


def _entry(shape: Shape, across: NDArray[np.float64]) -> NDArray[np.float64]:
    """Height z at which a ray along z enters a particle, for points (n, 2) across it."""
    if isinstance(shape, Faceted):
        normals, distances = shape.body.planes
        below = normals[:, 2] < 0.0
        facing, reach = normals[below], distances[below]
        heights = (reach - across @ facing[:, :2].T) / facing[:, 2]
        entry: NDArray[np.float64] = heights.max(axis=1)
        return entry
    a, b, c = shape.half_extents
    inside = np.maximum(1.0 - (across[:, 0] / a) ** 2 - (across[:, 1] / b) ** 2, 0.0)
    return -c * np.sqrt(inside)


def _solved(shape: Shape, index: complex, x: float, threads: int) -> NDArray:
    """Solution of another size without the phase of straight rays."""
    wave = _Wave(shape, index, x, threads)
    return wave.solve(np.zeros_like(wave.incident))[0] / wave.phase


def run(threads: int) -> Result:
    """Count the products from every start."""
    rows: list[dict[str, Any]] = []
    for name, shape in SHAPES.items():
        for index in INDICES:
            for x in SIZES:
                wave = _Wave(shape, index, x, threads)
                two_below, below, above = (
                    _solved(shape, index, x * RATIO**step, threads) for step in (-2, -1, 1)
                )
                starts = {
                    "zero": np.zeros_like(wave.incident),
                    "plane wave": wave.incident,
                    "straight rays": wave.rays,
                    "one-sided": (2.0 * below - two_below) * wave.phase,
                    "two-sided": 0.5 * (below + above) * wave.phase,
                }
                row: dict[str, Any] = {"particle": name, "index": f"{index.real:g}"}
                row["size_parameter"] = x
                for start in STARTS:
                    _, products, residual = wave.solve(starts[start])
                    row[f"{start}: products"] = products
                    row[f"{start}: first residual"] = residual
                rows.append(row)
    return Result(
        rows,
        [
            f"One plane wave, {CELLS} cells across, generalized minimal residuals without restart "
            f"to a relative residual of {TOLERANCE:g}, double precision.",
            "'irregular' is the convex hull of random points, without any symmetry.",
            "'plane wave' takes the incident field for the exciting one, 'straight rays' gives it "
            "the phase of a straight ray through the particle.",
            f"'one-sided' extrapolates from two smaller sizes at a ratio of {RATIO:g}, 'two-sided' "
            "is the mean of one smaller and one larger size, both with the phase of straight rays "
            "taken out.",
        ],
        lambda path: _draw(path, rows),
    )


def _draw(path: Path, rows: list[dict[str, Any]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, len(SHAPES), figsize=(13, 3.8), sharey=True)
    for ax, name in zip(axes, SHAPES, strict=True):
        mine = [row for row in rows if row["particle"] == name]
        place = np.arange(len(mine))
        for k, (start, hatch) in enumerate(
            zip(STARTS, ("", "//", "..", "xx", "\\\\"), strict=True)
        ):
            heights = [row[f"{start}: products"] for row in mine]
            ax.bar(place + 0.16 * (k - 2), heights, 0.15, label=start, hatch=hatch, edgecolor="w")
        labels = [f"m {row['index']}\nx {row['size_parameter']:g}" for row in mine]
        ax.set_xticks(place, labels)
        ax.set_title(name)
    axes[0].set_ylabel("products")
    axes[0].legend(fontsize=8)
    figure.tight_layout()
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
