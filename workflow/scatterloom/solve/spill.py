"""Blocks of rows kept on disk where memory does not hold them, and products taken by parts."""

from __future__ import annotations

import mmap
import tempfile
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

_PART_BYTES = 64 * 2**20
"""Of a block on disk that is in memory at a time."""


class Spill:
    """Keeps blocks in files without a name, which vanish with the process however it ends.

    Parameters
    ----------
    folder : Path
        On a disk with room for the blocks; made if missing.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self.nbytes = 0

    def __call__(self, block: NDArray) -> NDArray:
        """Return the same rows, on disk.

        Raises
        ------
        OSError
            If the disk is full.
        """
        self._folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=self._folder) as file:
            # Written, not mapped: a full disk is then an error and no signal.
            file.write(np.ascontiguousarray(block).data)
            file.flush()
            self.nbytes += block.nbytes
            return np.memmap(file, dtype=block.dtype, mode="r", shape=block.shape)


def _parts(rows: NDArray) -> Iterator[slice]:
    """Columns to take at a time: all of them if the rows are in memory."""
    width = rows.shape[1]
    step = width
    if isinstance(rows, np.memmap):
        step = max(1, _PART_BYTES // (rows.itemsize * max(1, len(rows))))
    for start in range(0, width, step):
        yield slice(start, start + step)


def _release(rows: NDArray) -> None:
    """Let go of the memory that reading a block from disk took."""
    if isinstance(rows, np.memmap):
        mapped = rows._mmap  # type: ignore[attr-defined]
        if hasattr(mapped, "madvise"):
            mapped.madvise(mmap.MADV_DONTNEED)


def overlap(left: NDArray, right: NDArray) -> NDArray:
    """``left @ right^H``."""
    total = sum(left[:, part] @ right[:, part].conj().T for part in _parts(right))
    _release(right)
    return np.asarray(total)


def add_rows(target: NDArray, factors: NDArray, rows: NDArray) -> None:
    """``target += factors @ rows``, in place."""
    for part in _parts(rows):
        target[:, part] += factors @ rows[:, part]
    _release(rows)
