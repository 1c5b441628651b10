"""Checkpoints of a case that takes long: the fields of every lattice, the best so far."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from scatterloom.errors import IntegrityError
from scatterloom.solve.start import StoredFields
from scatterloom.store.fields import FieldFile, read_fields, write_fields


@dataclass(frozen=True)
class Saved:
    """Fields of one lattice, and the products per wave that they took."""

    fields: StoredFields
    products: float


class Checkpoint:
    """The checkpoint file of one case.

    Parameters
    ----------
    path : Path
    seconds : float
        Least time between two savings.
    """

    def __init__(self, path: Path, seconds: float) -> None:
        self._path = path
        self._seconds = seconds
        self._last = time.monotonic()

    def read(self) -> dict[tuple[int, int], Saved]:
        """Return what was saved, by (cells across, truncation); nothing if it is unreadable."""
        if not self._path.exists():
            return {}
        try:
            found = {}
            for entry in read_fields(self._path):
                cells, n_max = (int(part) for part in entry.digest.split("/"))
                found[cells, n_max] = Saved(entry.levels[0], entry.products)
            return found
        except (IntegrityError, ValueError, IndexError) as error:
            print(f"{error}; the case starts anew", file=sys.stderr)
            return {}

    def offer(self, collect: Callable[[], Mapping[tuple[int, int], Saved]]) -> None:
        """Save what `collect` returns if the last saving is long enough ago."""
        if time.monotonic() - self._last < self._seconds:
            return
        entries = [
            FieldFile(f"{cells}/{n_max}", s.fields.size_parameter, s.products, [s.fields])
            for (cells, n_max), s in collect().items()
        ]
        write_fields(self._path, entries)
        self._last = time.monotonic()

    def remove(self) -> None:
        """Forget the case: it is finished."""
        self._path.unlink(missing_ok=True)
