"""Product of waves with the lattice matrix A = I - a^1/2 G a^1/2.

Mirror planes of the lattice particle split fields into parity classes that A never
mixes. A field of known parity is stored on the fundamental cells only (one octant for
three planes), and one product serves one wave of every class: their sum is formed on
the whole box, A is applied once, and the classes are taken apart again.

On the box the components of a few waves lie side by side at every point, in the lanes of
the processor's vectors (`scatterloom.dipole.lanes`); the convolution is that of
`scatterloom.dipole.transform`.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import DTypeLike, NDArray

from scatterloom.dipole.kernel import octant_spectrum
from scatterloom.dipole.lanes import mix, scale, tensor_times
from scatterloom.dipole.polarizability import CellTensors
from scatterloom.dipole.transform import (
    convolve_planes,
    efficient_length,
    transform_columns,
    transform_plan,
)
from scatterloom.particle.lattice import Lattice

_LANES = ((8, 2), (16, 5))
"""Lanes of a group, and the waves whose three components they take."""

_BLOCK = 8
"""Cells taken at a time: a cache line of each wave."""


@njit(cache=True)
def _mix_classes(buffer, n_class, group, lanes, like):  # type: ignore[no-untyped-def]
    """Sums of all classes with the signs they have at every image of a cell, in place."""
    step = 1
    while step < n_class:
        for base in range(0, n_class, 2 * step):
            for s in range(base, base + step):
                mix(buffer + s * group, buffer + (s + step) * group, lanes, like)
        step *= 2


@njit(cache=True, nogil=True)
def _spread(grid, work, waves, wave, count, root, target, signs, plus, first, last, lanes):  # type: ignore[no-untyped-def]
    """Multiply `count` waves by a^1/2 and lay the sum of all classes on the box.

    Takes the cells `first` to `last` - 1; the box has been filled with zeros.
    """
    n_class, width = waves.shape[0], len(lanes)
    each = width // 3
    like = root
    group = 2 * width * like.itemsize
    part = work[: _BLOCK * n_class * 2 * width].reshape(_BLOCK, n_class, 2, width)
    part[:] = 0
    base, plus_at = np.intp(grid.ctypes.data), np.intp(plus.ctypes.data)
    for start in range(first, last, _BLOCK):
        stop = min(start + _BLOCK, last)
        for c in range(n_class):
            for q in range(3):
                for b in range(count):
                    lane = q * each + b
                    for o in range(start, stop):
                        part[o - start, c, 0, lane] = waves[c, wave + b, q, o, 0]
                        part[o - start, c, 1, lane] = waves[c, wave + b, q, o, 1]
        buffer = np.intp(work.ctypes.data)
        for o in range(start, stop):
            tensor = np.intp(root.ctypes.data) + 12 * like.itemsize * o
            for c in range(n_class):
                tensor_times(buffer + c * group, tensor, plus_at, 0, group // 2, lanes, like)
            _mix_classes(buffer, n_class, group, lanes, like)
            for s in range(n_class):
                factor = np.intp(signs.ctypes.data) + s * width * like.itemsize
                scale(buffer + s * group, factor, base + target[s, o] * group, lanes, like)
            buffer += n_class * group


@njit(cache=True, nogil=True)
def _collect(grid, work, waves, out, wave, count, root, target, signs, plus, first, last, lanes):  # type: ignore[no-untyped-def]
    """Take the classes apart, multiply by a^1/2 and subtract from the waves."""
    n_class, width = waves.shape[0], len(lanes)
    each = width // 3
    like = root
    group = 2 * width * like.itemsize
    part = work[: _BLOCK * n_class * 2 * width].reshape(_BLOCK, n_class, 2, width)
    base, plus_at = np.intp(grid.ctypes.data), np.intp(plus.ctypes.data)
    for start in range(first, last, _BLOCK):
        stop = min(start + _BLOCK, last)
        buffer = np.intp(work.ctypes.data)
        for o in range(start, stop):
            tensor = np.intp(root.ctypes.data) + 12 * like.itemsize * o
            for s in range(n_class):
                factor = np.intp(signs.ctypes.data) + s * width * like.itemsize
                scale(base + target[s, o] * group, factor, buffer + s * group, lanes, like)
            _mix_classes(buffer, n_class, group, lanes, like)
            for c in range(n_class):
                tensor_times(buffer + c * group, tensor, plus_at, 0, group // 2, lanes, like)
            buffer += n_class * group
        for c in range(n_class):
            for q in range(3):
                for b in range(count):
                    w, lane = wave + b, q * each + b
                    for o in range(start, stop):
                        out[c, w, q, o, 0] = waves[c, w, q, o, 0] - part[o - start, c, 0, lane]
                        out[c, w, q, o, 1] = waves[c, w, q, o, 1] - part[o - start, c, 1, lane]


def _aligned(count: int, dtype: np.dtype) -> NDArray:
    """Uninitialized array that begins on a cache line."""
    raw = np.empty(count * dtype.itemsize + 64, dtype=np.uint8)
    start = -raw.ctypes.data % 64
    return raw[start : start + count * dtype.itemsize].view(dtype)


def _packed(tensor: NDArray, real: np.dtype) -> NDArray:
    """Real parts of six components, then the imaginary ones, of complex (n, 6); flat.

    Eight values are loaded for six, hence some room at the end.
    """
    out = _aligned(12 * len(tensor) + 2, real)
    parts = out[:-2].reshape(-1, 2, 6)
    parts[:, 0], parts[:, 1] = tensor.real, tensor.imag
    out[-2:] = 0.0
    return out


def _packed_planes(spectrum: NDArray, real: np.dtype) -> NDArray:
    """The same of complex (n, 6, ...), plane by plane."""
    planes, _, *rest = spectrum.shape
    out = _aligned(12 * planes * int(np.prod(rest)) + 2, real)
    parts = out[:-2].reshape(planes, *rest, 2, 6)
    for plane, part in zip(spectrum, parts, strict=True):
        part[..., 0, :], part[..., 1, :] = (
            plane.real.transpose(1, 2, 0),
            plane.imag.transpose(1, 2, 0),
        )
    out[-2:] = 0.0
    return out


class LatticeMatrix:
    """The matrix A of one lattice particle at one size, acting on blocks of waves.

    Waves are arrays (n_class, n_wave, 3, n_cell): component and fundamental cell of
    waves of each parity class. Bit a of a class number is set if the field is odd
    under the mirror plane of the a-th mirrored axis: E(-x) = -(-Ex, Ey, Ez)(x).

    Parameters
    ----------
    lattice : Lattice
    tensors : CellTensors
        Of all cells of the lattice, in its order, or of the fundamental ones alone.
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
        half = tuple(efficient_length(n) for n in lattice.box)
        self.half: tuple[int, int, int] = half  # type: ignore[assignment]
        mirrored = [a for a in range(3) if lattice.mirrors[a]]
        self.n_class = 2 ** len(mirrored)
        fundamental = np.ones(len(lattice.cell), dtype=bool)
        for a in mirrored:
            fundamental &= lattice.cell[:, a] >= lattice.box[a] // 2
        self.fundamental = np.flatnonzero(fundamental)
        cell = lattice.cell[self.fundamental].astype(np.int64)
        self.n_cell = len(cell)
        # In groups; an odd number of them in a row keeps columns apart in the cache.
        row = lattice.box[2] | 1
        self._strides = (lattice.box[1] * row + 1, row, 1)
        self._target = np.empty((self.n_class, self.n_cell), dtype=np.int64)
        signs = np.ones((self.n_class, 3))
        for s in range(self.n_class):
            image = cell.copy()
            for bit, a in enumerate(mirrored):
                if s >> bit & 1:
                    image[:, a] = lattice.box[a] - 1 - image[:, a]
                    # The component across a mirror plane has the opposite parity.
                    signs[s, a] = -1.0
            self._target[s] = image @ self._strides
        self._signs = signs
        real = self.dtype.type(0).real.dtype
        own = slice(None) if len(tensors.root) == self.n_cell else self.fundamental
        self.root: NDArray = np.ascontiguousarray(tensors.root[own].T.astype(dtype))
        self.loss = np.ascontiguousarray(tensors.loss[own].T)
        self._root = _packed(self.root.T, real)
        spectrum = octant_spectrum(lattice.box, self.half, kd, dtype)
        self._kernel = _packed_planes(spectrum, real)
        # Signs of the six components in every octant of the spectrum.
        odd = np.array([[i >> b & 1 for b in (2, 1, 0)] for i in range(8)])
        flips = np.ones((9, 8), dtype=real)
        for component, (a, b) in enumerate(((0, 1), (0, 2), (1, 2)), 3):
            flips[:8, component] = 1 - 2 * (odd[:, a] ^ odd[:, b])
        self._flips = flips
        self._used = np.zeros(lattice.box[1] * lattice.box[2], dtype=np.bool_)
        self._used[lattice.cell[:, 1] * lattice.box[2] + lattice.cell[:, 2]] = True
        self._plans = [transform_plan(h, real) for h in self.half]
        self._grid: NDArray = _aligned(0, real)
        self._work: list[NDArray] = []
        self.products = 0

    @property
    def nbytes(self) -> int:
        """Bytes held by the kernel, the cell tensors and the work space of one product."""
        lanes, _ = _LANES[-1]
        fixed = self._kernel.nbytes + self._root.nbytes + self.root.nbytes
        fixed += self.loss.nbytes + self._target.nbytes
        grid, work = self._groups()
        return fixed + (grid + self.threads * work) * lanes * self.dtype.itemsize

    def _groups(self) -> tuple[int, int]:
        """Groups of the box with its padded x axis, and of the work space of one thread."""
        columns = 2 * self.half[1] * self._strides[1] + 2 * self.half[2] + 4 * max(self.half)
        return 2 * self.half[0] * self._strides[0], max(columns, _BLOCK * self.n_class)

    def __call__(self, waves: NDArray, out: NDArray | None = None) -> NDArray:
        """Return A applied to every wave; `waves` is left untouched.

        Parameters
        ----------
        waves : complex (n_class, n_wave, 3, n_cell), of this matrix's dtype
        out : same shape, optional
        """
        n_wave = waves.shape[1]
        expected = (self.n_class, n_wave, 3, self.n_cell)
        if waves.shape != expected or waves.dtype != self.dtype:
            raise ValueError(
                f"waves are {waves.dtype} {waves.shape}, should be {self.dtype} {expected}"
            )
        if out is None:
            out = np.empty_like(waves)
        parts = (*expected, 2)
        source = np.ascontiguousarray(waves).view(self._root.dtype).reshape(parts)
        result = out.view(self._root.dtype).reshape(parts)
        first = 0
        while first < n_wave:
            left = n_wave - first
            lanes, most = next((w for w in _LANES if w[1] >= left), _LANES[-1])
            count = min(most, left)
            self._multiply(source, result, first, count, (0,) * lanes)
            first += count
        self.products += n_wave
        return out

    def _multiply(
        self, source: NDArray, result: NDArray, first: int, count: int, lanes: tuple[int, ...]
    ) -> None:
        """Multiply the waves that fit into one group."""
        width = 2 * len(lanes)
        n_grid, n_work = self._groups()
        if len(self._grid) < n_grid * width:
            real = self._root.dtype
            self._grid = _aligned(n_grid * width, real)
            self._work = [_aligned(n_work * width, real) for _ in range(self.threads)]
        grid, box, half = self._grid, self.box, self.half
        strides = tuple(s * width * grid.itemsize for s in self._strides)
        (radix_x, table_x), (radix_y, table_y), (radix_z, table_z) = self._plans
        signs = np.zeros((self.n_class, len(lanes)), dtype=grid.dtype)
        signs[:, : 3 * (len(lanes) // 3)] = np.repeat(self._signs, len(lanes) // 3, axis=1)
        share = signs / grid.dtype.type(self.n_class)
        cells = (self._root, self._target)
        columns = (self._used, box, half, strides, radix_x, table_x)
        planes = (
            self._kernel, self._flips, box, half, strides, radix_y, table_y, radix_z, table_z,
        )  # fmt: skip
        plus = self._flips[8]
        n_column, n_plane = len(self._used), 2 * half[0]
        grid[: box[0] * self._strides[0] * width] = 0.0
        run = self._in_parts
        run(_spread, self.n_cell, (source, first, count, *cells, signs, plus), lanes)
        run(transform_columns, n_column, (*columns, False), lanes)
        run(convolve_planes, n_plane, planes, lanes)
        run(transform_columns, n_column, (*columns, True), lanes)
        run(_collect, self.n_cell, (source, result, first, count, *cells, share, plus), lanes)

    def _in_parts(
        self, function: Callable[..., None], total: int, args: tuple[Any, ...], lanes: tuple
    ) -> None:
        """Run a function on all of `total` items, an equal part of them on every thread."""
        if self.threads == 1:
            function(self._grid, self._work[0], *args, 0, total, lanes)
            return
        edges = [total * t // self.threads for t in range(self.threads + 1)]
        with ThreadPoolExecutor(self.threads) as pool:
            list(
                pool.map(
                    lambda t: function(
                        self._grid, self._work[t], *args, edges[t], edges[t + 1], lanes
                    ),
                    range(self.threads),
                )
            )
