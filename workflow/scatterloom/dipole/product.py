"""Product of waves with the lattice matrix A = I - a^1/2 G a^1/2.

Mirror planes of the lattice particle split fields into parity classes that A never
mixes. A field of known parity is stored on the fundamental cells only (one octant for
three planes), and one product serves one wave of every class: their sum is formed on
the whole box, A is applied once, and the classes are taken apart again.

The convolution runs on the doubled grid without ever transforming known zeros: the
padding is added axis by axis, and the second and third axis are handled one x plane at
a time, so that the work stays in cache.
"""

from __future__ import annotations

import ducc0
import numpy as np
from numba import njit
from numpy.typing import DTypeLike, NDArray

from scatterloom.dipole.kernel import octant_spectrum
from scatterloom.dipole.polarizability import CellTensors
from scatterloom.particle.lattice import Lattice


def padded_half(n: int) -> int:
    """Half of an efficient padded length for `n` cells."""
    return (ducc0.fft.good_size(2 * n, False) + 1) // 2 if n > 1 else 1


@njit(cache=True, fastmath=True)
def _spread(waves, first, root, target, flip, box, grid):  # type: ignore[no-untyped-def]
    """Multiply by a^1/2 and lay the sum of all classes on the box (grid zeroed before)."""
    n_class, n_cell = waves.shape[0], waves.shape[3]
    nyz, nz = box[1] * box[2], box[2]
    part = np.empty((3, n_class), dtype=waves.dtype)
    work = np.empty(n_class, dtype=waves.dtype)
    for b in range(grid.shape[0]):
        w = first + b
        for o in range(n_cell):
            for c in range(n_class):
                x, y, z = waves[c, w, 0, o], waves[c, w, 1, o], waves[c, w, 2, o]
                part[0, c] = root[0, o] * x + root[3, o] * y + root[4, o] * z
                part[1, c] = root[3, o] * x + root[1, o] * y + root[5, o] * z
                part[2, c] = root[4, o] * x + root[5, o] * y + root[2, o] * z
            for q in range(3):
                for c in range(n_class):
                    work[c ^ flip[q]] = part[q, c]
                step = 1
                while step < n_class:
                    for base in range(0, n_class, 2 * step):
                        for s in range(base, base + step):
                            u, v = work[s], work[s + step]
                            work[s], work[s + step] = u + v, u - v
                    step *= 2
                for s in range(n_class):
                    t = target[s, o]
                    grid[b, q, t // nyz, (t % nyz) // nz, t % nz] = work[s]


@njit(cache=True, fastmath=True)
def _collect(waves, first, root, target, flip, box, grid, out):  # type: ignore[no-untyped-def]
    """Take the classes apart, multiply by a^1/2 and subtract from the waves."""
    n_class, n_cell = waves.shape[0], waves.shape[3]
    nyz, nz = box[1] * box[2], box[2]
    part = np.empty((3, n_class), dtype=waves.dtype)
    work = np.empty(n_class, dtype=waves.dtype)
    share = waves.real.dtype.type(1.0 / n_class)
    for b in range(grid.shape[0]):
        w = first + b
        for o in range(n_cell):
            for q in range(3):
                for s in range(n_class):
                    t = target[s, o]
                    work[s] = grid[b, q, t // nyz, (t % nyz) // nz, t % nz]
                step = 1
                while step < n_class:
                    for base in range(0, n_class, 2 * step):
                        for s in range(base, base + step):
                            u, v = work[s], work[s + step]
                            work[s], work[s + step] = u + v, u - v
                    step *= 2
                for c in range(n_class):
                    part[q, c] = share * work[c ^ flip[q]]
            for c in range(n_class):
                x, y, z = part[0, c], part[1, c], part[2, c]
                out[c, w, 0, o] = waves[c, w, 0, o] - (
                    root[0, o] * x + root[3, o] * y + root[4, o] * z
                )
                out[c, w, 1, o] = waves[c, w, 1, o] - (
                    root[3, o] * x + root[1, o] * y + root[5, o] * z
                )
                out[c, w, 2, o] = waves[c, w, 2, o] - (
                    root[4, o] * x + root[5, o] * y + root[2, o] * z
                )


@njit(cache=True, fastmath=True)
def _multiply_plane(plane, kernel, sign_x):  # type: ignore[no-untyped-def]
    """Multiply one kx plane of every wave by the octant kernel, in place."""
    n_y, n_z = plane.shape[2], plane.shape[3]
    half_y, half_z = n_y // 2, n_z // 2
    for b in range(plane.shape[0]):
        for j in range(n_y):
            jj, sign_y = (j, 1) if j <= half_y else (n_y - j, -1)
            sxy, sxz, syz = sign_x * sign_y, sign_x, sign_y
            kxx, kyy, kzz = kernel[0, jj], kernel[1, jj], kernel[2, jj]
            kxy, kxz, kyz = kernel[3, jj], kernel[4, jj], kernel[5, jj]
            px, py, pz = plane[b, 0, j], plane[b, 1, j], plane[b, 2, j]
            for k in range(half_z + 1):
                x, y, z = px[k], py[k], pz[k]
                xy, xz, yz = sxy * kxy[k], sxz * kxz[k], syz * kyz[k]
                px[k] = kxx[k] * x + xy * y + xz * z
                py[k] = xy * x + kyy[k] * y + yz * z
                pz[k] = xz * x + yz * y + kzz[k] * z
            for k in range(1, half_z):
                m = n_z - k
                x, y, z = px[m], py[m], pz[m]
                xy, xz, yz = sxy * kxy[k], -sxz * kxz[k], -syz * kyz[k]
                px[m] = kxx[k] * x + xy * y + xz * z
                py[m] = xy * x + kyy[k] * y + yz * z
                pz[m] = xz * x + yz * y + kzz[k] * z


@njit(cache=True)
def _take_plane(grid, i, n_y, n_z, out):  # type: ignore[no-untyped-def]
    """Copy x plane `i` into `out`, padding the y axis with zeros."""
    for b in range(out.shape[0]):
        for q in range(3):
            for j in range(n_y):
                for k in range(n_z):
                    out[b, q, j, k] = grid[b, q, i, j, k]
            out[b, q, n_y:, :] = 0


@njit(cache=True)
def _pad_z(source, out):  # type: ignore[no-untyped-def]
    """Copy `source`, padding the z axis with zeros."""
    n_z = source.shape[3]
    for b in range(source.shape[0]):
        for q in range(3):
            for j in range(source.shape[2]):
                for k in range(n_z):
                    out[b, q, j, k] = source[b, q, j, k]
                out[b, q, j, n_z:] = 0


class LatticeMatrix:
    """The matrix A of one lattice particle at one size, acting on blocks of waves.

    Waves are arrays (n_class, n_wave, 3, n_cell): component and fundamental cell of
    waves of each parity class. Bit a of a class number is set if the field is odd
    under the mirror plane of the a-th mirrored axis: E(-x) = -(-Ex, Ey, Ez)(x).

    Parameters
    ----------
    lattice : Lattice
    tensors : CellTensors
        Of all cells of the lattice, in its order.
    kd : float
        Lattice spacing times wavenumber.
    dtype : complex64 (default) or complex128
    threads : int

    Attributes
    ----------
    products : int
        Packed products done so far (one serves a wave of every class).
    """

    def __init__(
        self,
        lattice: Lattice,
        tensors: CellTensors,
        kd: float,
        dtype: DTypeLike = np.complex64,
        threads: int = 1,
    ) -> None:
        self.dtype = np.dtype(dtype)
        self.threads = threads
        self.kd = kd
        self.box = lattice.box
        self.half = tuple(padded_half(n) for n in lattice.box)
        mirrored = [a for a in range(3) if lattice.mirrors[a]]
        self.n_class = 2 ** len(mirrored)
        fundamental = np.ones(len(lattice.cell), dtype=bool)
        for a in mirrored:
            fundamental &= lattice.cell[:, a] >= lattice.box[a] // 2
        self.fundamental = np.flatnonzero(fundamental)
        cell = lattice.cell[self.fundamental].astype(np.int64)
        self.n_cell = len(cell)
        self._target = np.empty((self.n_class, self.n_cell), dtype=np.int64)
        for s in range(self.n_class):
            image = cell.copy()
            for bit, a in enumerate(mirrored):
                if s >> bit & 1:
                    image[:, a] = lattice.box[a] - 1 - image[:, a]
            self._target[s] = (image[:, 0] * self.box[1] + image[:, 1]) * self.box[2] + image[:, 2]
        self._flip = np.zeros(3, dtype=np.int64)
        for bit, a in enumerate(mirrored):
            self._flip[a] = 1 << bit
        self.root: NDArray = np.ascontiguousarray(tensors.root[self.fundamental].T.astype(dtype))
        self.loss = np.ascontiguousarray(tensors.loss[self.fundamental].T)
        self._kernel = octant_spectrum(lattice.box, self.half, kd, dtype)  # type: ignore[arg-type]
        self._batch = max(1, min(8, int(4e6 / (3 * 8 * np.prod(self.half) / self.half[0] * 4))))
        self.products = 0

    @property
    def nbytes(self) -> int:
        """Bytes held by the kernel, the cell tensors and the work space of one product."""
        px, py, pz = (2 * h for h in self.half)
        work = px * self.box[1] * self.box[2] + py * self.box[2] + py * pz
        fixed = self._kernel.nbytes + self.root.nbytes + self.loss.nbytes + self._target.nbytes
        return fixed + 3 * self._batch * work * self.dtype.itemsize

    def __call__(self, waves: NDArray, out: NDArray | None = None) -> NDArray:
        """Return A applied to every wave; `waves` is left untouched.

        Parameters
        ----------
        waves : complex (n_class, n_wave, 3, n_cell), of this matrix's dtype
        out : same shape, optional
        """
        expected = (self.n_class, waves.shape[1], 3, self.n_cell)
        if waves.shape != expected or waves.dtype != self.dtype:
            raise ValueError(
                f"waves are {waves.dtype} {waves.shape}, should be {self.dtype} {expected}"
            )
        if out is None:
            out = np.empty_like(waves)
        box = np.array(self.box, dtype=np.int64)
        for first in range(0, waves.shape[1], self._batch):
            count = min(self._batch, waves.shape[1] - first)
            grid = np.zeros((count, 3, 2 * self.half[0], *self.box[1:]), dtype=self.dtype)
            _spread(waves, first, self.root, self._target, self._flip, box, grid)
            self._convolve(grid)
            _collect(waves, first, self.root, self._target, self._flip, box, grid, out)
        self.products += waves.shape[1]
        return out

    def _convolve(self, grid: NDArray) -> None:
        """Convolve with the kernel, in place; the first box[0] x planes hold in- and output."""
        count, (_, ny, nz) = grid.shape[0], self.box
        px, py, pz = (2 * h for h in self.half)
        threads = self.threads
        c2c = ducc0.fft.c2c
        c2c(grid, [2], True, 0, grid, threads)
        column = np.empty((count, 3, py, nz), dtype=self.dtype)
        plane = np.empty((count, 3, py, pz), dtype=self.dtype)
        for i in range(px):
            _take_plane(grid, i, ny, nz, column)
            c2c(column, [2], True, 0, column, threads)
            _pad_z(column, plane)
            c2c(plane, [3], True, 0, plane, threads)
            mirrored = i > self.half[0]
            _multiply_plane(plane, self._kernel[px - i if mirrored else i], -1 if mirrored else 1)
            c2c(plane, [3], False, 0, plane, threads)
            column[...] = plane[..., :nz]
            c2c(column, [2], False, 0, column, threads)
            grid[:, :, i] = column[:, :, :ny]
        c2c(grid, [2], False, 0, grid, threads)
