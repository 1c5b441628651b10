"""Sectors: what the lattice matrix never mixes, finer than the parity classes.

If the lattice is also its own image under the exchange of x and y (a quarter turn
about z, its mirror planes given), the exchange maps fields of one parity class onto
another one, or onto the same class:

* equal parity in x and y: the class falls into fields that the exchange leaves as they are
  and fields whose sign it changes. Their sum takes one place in a product.
* unequal parity: one of two classes is solved, the other one is its image. Half of
  the fields are multiplied in the place of the other class.

Either way a packed product serves twice as many waves, and blocks have half the rows or
half the columns.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.dipole.polarizability import CellTensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.particle.lattice import Lattice

_SAME = 1e-9
"""Largest difference of a cell's tensors from those of its image, over the largest tensor."""

_SWAPPED = [1, 0, 2, 3, 5, 4]
"""Components xx, yy, zz, xy, xz, yz of a tensor with x and y exchanged."""


def exchange_of_cells(lattice: Lattice, tensors: CellTensors) -> NDArray[np.int64] | None:
    """For each cell the one with x and y exchanged, or None if the particle is not its image."""
    if not (lattice.mirrors[0] and lattice.mirrors[1]) or lattice.box[0] != lattice.box[1]:
        return None
    cell = lattice.cell.astype(np.int64)
    strides = np.array([lattice.box[1] * lattice.box[2], lattice.box[2], 1])
    key = cell @ strides  # ascending: cells are in C order
    image = np.searchsorted(key, cell[:, [1, 0, 2]] @ strides)
    image = np.minimum(image, len(cell) - 1)
    if not np.array_equal(cell[image], cell[:, [1, 0, 2]]):
        return None
    for tensor in (tensors.root, tensors.loss):
        difference = np.abs(tensor[image] - tensor[:, _SWAPPED]).max()
        if not difference <= _SAME * np.abs(tensor).max():
            return None
    return image


@dataclass(frozen=True)
class Sector:
    """One set of fields closed under the lattice matrix.

    Attributes
    ----------
    parity : int
        Parity class.
    exchange : int
        +1 or -1: sign of the fields under the exchange of x and y; 0: any.
    image : int
        Parity class that holds the images of these fields under the exchange; `parity`
        itself if there is none other.
    """

    parity: int
    exchange: int
    image: int

    @property
    def copies(self) -> int:
        """Classes that the solution of the sector stands for."""
        return 1 if self.image == self.parity else 2


@njit(cache=True)
def _together(even, odd, low, high, single, out):  # type: ignore[no-untyped-def]
    """Fields on all cells from their even and odd parts under the exchange."""
    half = even.real.dtype.type(np.sqrt(0.5))
    for w in range(max(len(even), len(odd))):
        for p in range(len(low)):
            e = half * even[w, p] if w < len(even) else even.dtype.type(0)
            o = half * odd[w, p] if w < len(odd) else even.dtype.type(0)
            out[w, low[p]] = e + o
            out[w, high[p]] = e - o
        for p in range(len(single)):
            out[w, single[p]] = even[w, len(low) + p] if w < len(even) else even.dtype.type(0)


@njit(cache=True)
def _even_part(rows, low, high, single, out):  # type: ignore[no-untyped-def]
    half = rows.real.dtype.type(np.sqrt(0.5))
    for w in range(len(out)):
        for p in range(len(low)):
            out[w, p] = half * (rows[w, low[p]] + rows[w, high[p]])
        for p in range(len(single)):
            out[w, len(low) + p] = rows[w, single[p]]


@njit(cache=True)
def _odd_part(rows, low, high, out):  # type: ignore[no-untyped-def]
    half = rows.real.dtype.type(np.sqrt(0.5))
    for w in range(len(out)):
        for p in range(len(low)):
            out[w, p] = half * (rows[w, low[p]] - rows[w, high[p]])


class Sectors:
    """The sectors of a lattice matrix, and how their rows share a product.

    Rows of a sector keep their products with each other: coordinates of fields that the
    exchange leaves or changes in sign are sums or differences over sqrt 2.

    Parameters
    ----------
    matrix : LatticeMatrix
    exchanged : int64 (n_cell,), optional
        Image of every cell of the lattice (`exchange_of_cells`); without, the sectors are the
        parity classes.
    """

    def __init__(self, matrix: LatticeMatrix, exchanged: NDArray[np.int64] | None = None) -> None:
        self.matrix = matrix
        count = matrix.n_class
        if exchanged is None:
            self.all = [Sector(c, 0, c) for c in range(count)]
            return
        place = np.full(len(exchanged), -1, dtype=np.int64)
        place[matrix.fundamental] = np.arange(matrix.n_cell)
        cells = place[exchanged[matrix.fundamental]]
        n = matrix.n_cell
        self._exchanged = np.concatenate([cells + n, cells, cells + 2 * n])
        index = np.arange(3 * n)
        self._low = index[index < self._exchanged]
        self._high = self._exchanged[self._low]
        self._single = index[index == self._exchanged]
        self.all = []
        for c in range(count):
            image = (c & ~3) | (c & 1) << 1 | c >> 1 & 1
            if image == c:
                self.all += [Sector(c, 1, c), Sector(c, -1, c)]
            elif c < image:
                self.all.append(Sector(c, 0, image))

    def part(self, sector: Sector, rows: NDArray) -> NDArray:
        """Rows of a sector from fields of its class, complex (n, 3 n_cell), that belong to it."""
        if not sector.exchange:
            return rows
        pairs = len(self._low)
        width = pairs + len(self._single) if sector.exchange > 0 else pairs
        out = np.empty((len(rows), width), dtype=rows.dtype)
        if sector.exchange > 0:
            _even_part(rows, self._low, self._high, self._single, out)
        else:
            _odd_part(rows, self._low, self._high, out)
        return out

    def whole(self, sector: Sector, rows: NDArray) -> NDArray:
        """Fields of the class from rows of a sector: the inverse of `part`."""
        if not sector.exchange:
            return rows
        out = np.empty((len(rows), 3 * self.matrix.n_cell), dtype=rows.dtype)
        none = rows[:0]
        even, odd = (rows, none) if sector.exchange > 0 else (none, rows)
        _together(even, odd, self._low, self._high, self._single, out)
        return out

    def apply(self, blocks: Sequence[NDArray]) -> list[NDArray]:
        """A times one block of rows for every sector, all in the same products."""
        matrix = self.matrix
        shares = [-(-len(b) // s.copies) for s, b in zip(self.all, blocks, strict=True)]
        shape = (matrix.n_class, max(shares), 3 * matrix.n_cell)
        packed = np.zeros(shape, dtype=matrix.dtype)
        by_place = dict(zip(((s.parity, s.exchange) for s in self.all), blocks, strict=True))
        for sector, block, share in zip(self.all, blocks, shares, strict=True):
            place = packed[sector.parity]
            if sector.exchange > 0:
                other = by_place[sector.parity, -1]
                _together(block, other, self._low, self._high, self._single, place)
            elif not sector.exchange:
                place[:share] = block[:share]
                if sector.copies == 2:
                    packed[sector.image, : len(block) - share] = block[share:, self._exchanged]
        images = matrix(packed.reshape(*shape[:2], 3, matrix.n_cell)).reshape(shape)
        out = []
        for sector, block, share in zip(self.all, blocks, shares, strict=True):
            image = images[sector.parity]
            if sector.copies == 2:
                rest = images[sector.image, : len(block) - share][:, self._exchanged]
                out.append(np.concatenate([image[:share], rest]))
            else:
                out.append(self.part(sector, image[: len(block)]))
        return out
