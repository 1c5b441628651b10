"""The same particle made of other kinds of cells, for comparison."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager, nullcontext
from dataclasses import replace
from unittest.mock import patch

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull

from scatterloom.dipole import polarizability
from scatterloom.particle.lattice import Composition, Lattice
from scatterloom.particle.shapes import Ellipsoid, Faceted, Shape

STAIRCASE, SCALAR, TENSOR, AS_USED = "staircase", "scalar mean", "tensor", "as used"


def _inside(shape: Shape, scale: float, points: NDArray[np.float64]) -> NDArray[np.bool_]:
    if isinstance(shape, Ellipsoid):
        return np.sum((points / (scale * shape.half_axes)) ** 2, axis=1) <= 1.0
    assert isinstance(shape, Faceted)
    planes = ConvexHull(scale * shape.body.corners).equations
    return np.all(points @ planes[:, :3].T + planes[:, 3] <= 1e-9, axis=1)


def _mixed(grid: Lattice, fraction: NDArray[np.float64]) -> Lattice:
    """Cells without interfaces: the arithmetic mean of their materials."""
    return replace(
        grid,
        fill=fraction.sum(axis=0),
        normal=np.zeros_like(grid.normal),
        area=np.zeros_like(grid.area),
        composition=Composition(fraction=fraction, surfaces=()),
    )


def staircase(shape: Shape, grid: Lattice) -> Lattice:
    """Every cell of one material, that at its centre; scaled to the particle's volume."""
    points = grid.centre()
    if grid.rotation is not None:
        points = points @ grid.rotation
    within = [_inside(shape, scale, points) for scale in shape.scales]
    keep = within[0]
    held = np.stack([*(w[keep] for w in within), np.zeros(keep.sum(), dtype=bool)]).astype(float)
    kept = replace(
        grid,
        cell=grid.cell[keep],
        fill=grid.fill[keep],
        normal=grid.normal[keep],
        area=grid.area[keep],
        spacing=float(np.cbrt(shape.volume / keep.sum())),
        composition=None,
    )
    return _mixed(kept, held[:-1] - held[1:])


def scalar_mean(shape: Shape, grid: Lattice) -> Lattice:
    """Cut cells with the arithmetic mean of the permittivity, weighted by exact volumes."""
    return _mixed(grid, grid.fraction)


def tensor(shape: Shape, grid: Lattice) -> Lattice:
    """Tensor cells between which no material moves; `without_shift` must be in force."""
    if grid.composition is None:
        return grid
    return replace(
        grid, composition=replace(grid.composition, regions=(), moment=grid.composition.moment[:0])
    )


@contextmanager
def without_shift() -> Iterator[None]:
    """Leave the surfaces in cut cells where they are."""
    with (
        patch.object(polarizability, "ALONG_SHIFT", 0.0),
        patch.object(polarizability, "ACROSS_SHIFT", 0.0),
    ):
        yield


CELL_KINDS: dict[str, tuple[Callable[[Shape, Lattice], Lattice], Callable]] = {
    STAIRCASE: (staircase, nullcontext),
    SCALAR: (scalar_mean, nullcontext),
    TENSOR: (tensor, without_shift),
    AS_USED: (lambda shape, grid: grid, nullcontext),
}
"""How the lattice is made, and what must be in force while it is solved."""
