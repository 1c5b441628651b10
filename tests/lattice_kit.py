"""Small lattice particles for tests, and their matrix written out in full.

The full matrix comes from `oracles.dense`, which uses no transform, no symmetry and no
packing; parity classes are taken apart here by reflecting the cells one by one.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from oracles import dense
from scatterloom.dipole.polarizability import cell_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.bodies import Surface
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import from_spec

SPHERE = {"kind": "sphere"}
OBLATE = {"kind": "spheroid", "equatorial_to_polar": 2.0}
PROLATE = {"kind": "spheroid", "equatorial_to_polar": 0.5}
TRIAXIAL = {"kind": "ellipsoid", "axes": [3.0, 2.1, 1.4]}


def of_shape(spec, cells_across: int, mirrors=(True, True, True)) -> Lattice:
    """Lattice of a shape that declares only some of its mirror planes."""
    return replace(lattice(from_spec(spec), cells_across), mirrors=mirrors)


def random_lattice(box, mirrors=(False, False, False), seed: int = 1) -> Lattice:
    """About two thirds of the cells of a box, arbitrary fill and normals, given mirror planes.

    No surface area, so that the permittivity of the cells is the plain tensor mean. Axes
    without a mirror plane may have any number of cells.
    """
    rng = np.random.default_rng(seed)
    fill = rng.uniform(0.05, 1.0, box) * (rng.uniform(size=box) < 0.65)
    fill[rng.uniform(size=box) < 0.2] = 1.0
    normal = rng.normal(size=(*box, 3))
    for axis in np.flatnonzero(mirrors):
        keep = np.arange(box[axis] // 2, box[axis])
        fill, normal = np.take(fill, keep, axis), np.take(normal, keep, axis)
        image = np.flip(normal, axis).copy()
        image[..., axis] *= -1.0
        fill = np.concatenate([np.flip(fill, axis), fill], axis)
        normal = np.concatenate([image, normal], axis)
    normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
    normal[fill == 1.0] = 0.0
    inside = fill > 0.0
    return Lattice(
        box=tuple(box),
        spacing=0.25,
        cell=np.argwhere(inside).astype(np.int32),
        fill=fill[inside],
        normal=normal[inside],
        area=np.zeros(np.count_nonzero(inside)),
        mirrors=tuple(mirrors),
        symmetry="none",
        cells_across=max(box),
    )


def packed_matrix(
    cells: Lattice, index: complex, kd: float, dtype: type = np.complex128, threads: int = 1
) -> LatticeMatrix:
    """The matrix under test."""
    return LatticeMatrix(
        cells, cell_tensors(cells.fill, cells.normal, index, kd), kd, dtype, threads
    )


def root_of(tensors: NDArray) -> NDArray[np.complex128]:
    """Symmetric square roots (n, 3, 3) by eigenvectors (distinct real normals: orthogonal)."""
    value, vector = np.linalg.eig(tensors)
    return vector @ (np.sqrt(value)[:, :, None] * np.linalg.inv(vector))


def full_root(cells: Lattice, index: complex, kd: float) -> NDArray[np.complex128]:
    """Square root of the polarizability of every cell, (n_cell, 3, 3), k = 1."""
    eps = dense.cell_permittivity(cells.fill, cells.normal, complex(index) ** 2)
    return root_of(dense.cell_polarizability(eps, 1.0, kd))


def full_matrix(cells: Lattice, index: complex, kd: float) -> NDArray[np.complex128]:
    """A = I - a^1/2 G a^1/2 of the whole lattice, (3 n_cell, 3 n_cell), cell by cell."""
    root = full_root(cells, index, kd)
    count = len(cells.cell)
    position = cells.cell * kd
    blocks = np.zeros((count, count, 3, 3), complex)
    for i in range(count):
        others = np.arange(count) != i
        blocks[i, others] = dense.filtered_green(position[i] - position[others], 1.0, kd)
    blocks = root[:, None] @ blocks @ root[None, :]
    return np.eye(3 * count) - blocks.transpose(0, 2, 1, 3).reshape(3 * count, 3 * count)


def parity_sign(parity_class: int, image: int, mirrored, component: int) -> int:
    """Sign of a component at an image of a cell, for a field of the given parity class.

    A mirror plane normal to an axis turns an even field into (-Ex, Ey, Ez) (for the x
    axis) at the mirrored point, an odd one into minus that.
    """
    sign = 1
    for bit, axis in enumerate(mirrored):
        if image >> bit & 1:
            sign *= -1 if component == axis else 1
            sign *= -1 if parity_class >> bit & 1 else 1
    return sign


def unfold(cells: Lattice, waves: NDArray) -> NDArray:
    """Field on all cells, (n_class, n_wave, n_cell of lattice, 3), of every class alone.

    `waves` (n_class, n_wave, 3, n_fundamental) lives on the cells in the upper half of each
    mirrored axis, in the lattice's order.
    """
    mirrored = [axis for axis in range(3) if cells.mirrors[axis]]
    place = {tuple(c): i for i, c in enumerate(cells.cell.tolist())}
    fundamental = [
        c for c in cells.cell.tolist() if all(c[a] >= cells.box[a] // 2 for a in mirrored)
    ]
    out = np.zeros((*waves.shape[:2], len(cells.cell), 3), waves.dtype)
    for image in range(2 ** len(mirrored)):
        for o, cell in enumerate(fundamental):
            at = list(cell)
            for bit, axis in enumerate(mirrored):
                if image >> bit & 1:
                    at[axis] = cells.box[axis] - 1 - at[axis]
            target = place[tuple(at)]
            for c in range(len(waves)):
                for q in range(3):
                    sign = parity_sign(c, image, mirrored, q)
                    out[c, :, target, q] = sign * waves[c, :, q, o]
    return out


def random_waves(matrix: LatticeMatrix, count: int, seed: int = 2) -> NDArray:
    """Random waves of every parity class, in the matrix's dtype."""
    rng = np.random.default_rng(seed)
    shape = (matrix.n_class, count, 3, matrix.n_cell)
    return (rng.normal(size=shape) + 1j * rng.normal(size=shape)).astype(matrix.dtype)


def surfaces_of(interfaces, area_vector):
    """Surfaces from a table with the area vectors of every piece in every cell."""
    return tuple(
        Surface(inside, outside, np.zeros(len(table), np.int32), np.arange(len(table)), table)
        for (inside, outside), table in zip(interfaces, area_vector, strict=True)
    )
