"""From case records to blocks of the table: find the record of each cell, evaluate it."""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.errors import IntegrityError
from scatterloom.scattering.error_bars import BUDGET
from scatterloom.scattering.record import FAILED, CaseRecord
from scatterloom.store import schema
from scatterloom.store.casefile import read_records

FloatArray = NDArray[np.float64]

OPEN_FILES = 32
"""Case files kept in memory; neighbours in the table come from few files."""


class Cases:
    """Looks up the record of a case among the published case files of a campaign.

    Parameters
    ----------
    files : mapping of path to digests
        Each case file and the digests of the cases it must hold.
    partial : bool
        Whether a file that does not exist counts as missing cases instead of an error.
    """

    def __init__(self, files: Mapping[Path, Iterable[str]], *, partial: bool = False) -> None:
        self._file_of = {digest: path for path, digests in files.items() for digest in digests}
        self._held: OrderedDict[Path, dict[str, CaseRecord]] = OrderedDict()
        self._partial = partial

    def get(self, digest: str) -> CaseRecord | None:
        """Return the record of a case, or None if its file is absent and may be.

        Raises
        ------
        IntegrityError
            If the case file is missing (unless `partial`), damaged, or lacks the case.
        """
        path = self._file_of.get(digest)
        if path is None:
            raise IntegrityError(f"no case file is planned to hold case {digest}")
        if self._partial and path not in self._held and not path.exists():
            return None
        records = self._records(path)
        if digest not in records:
            raise IntegrityError(f"{path}: case {digest} is not among its {len(records)} records")
        return records[digest]

    def _records(self, path: Path) -> dict[str, CaseRecord]:
        if path not in self._held:
            self._held[path] = {record.digest: record for record in read_records(path)}
            while len(self._held) > OPEN_FILES:
                self._held.popitem(last=False)
        self._held.move_to_end(path)
        return self._held[path]


def empty_block(variable: schema.Variable, shape: Sequence[int]) -> NDArray[Any]:
    """Return an array in which every cell is missing."""
    return np.full(shape, variable.fill_value, variable.dtype)


def put_scalars(
    columns: Mapping[str, NDArray[Any]], cell: tuple[int, ...], record: CaseRecord
) -> None:
    """Write everything but the matrices of one record into its cell.

    A failed case keeps the fill values of its physical quantities, so that no
    reader mistakes them for results; its diagnostics are kept.
    """
    for name in ("status", "warning_flags", "lattice_cells", "wave_count"):
        columns[name][cell] = getattr(record, name)
    for name in ("products", "cold_products_estimate", "residual", "wall_seconds"):
        columns[name][cell] = getattr(record, name)
    if record.status == FAILED:
        return
    for part in BUDGET:
        columns[f"f11_error_{part}"][cell] = record.checks[part]
    columns["extrapolation_disagreement"][cell] = record.checks["extrapolation_disagreement"]
    for variable in schema.SCALARS:
        value, half_width = record.scalars[variable.name]
        columns[variable.name][cell] = value
        columns[f"{variable.name}_error"][cell] = half_width


def matrix_block(
    cells: Iterable[tuple[tuple[int, ...], CaseRecord | None]],
    shape: tuple[int, ...],
    angles_deg: FloatArray,
) -> dict[str, NDArray[Any]]:
    """Evaluate the scattering matrices of a block of cells.

    Parameters
    ----------
    cells : iterable of (position, record)
        Positions (particle, wavelength, size) within the block; None for a missing case.
    shape : tuple of int
        (particle, wavelength, size) extent of the block.
    angles_deg : float64 (n_angle,)

    Returns
    -------
    dict of str to (\\*shape, n_angle, 4, 4)
        By name of variable; NaN in the cells of missing and failed cases.
    """
    full = (*shape, len(angles_deg), 4, 4)
    out = {variable.name: empty_block(variable, full) for variable in schema.matrices()}
    for position, record in cells:
        if record is None or record.status == FAILED:
            continue
        for block, part in zip(out.values(), record.scattering_matrix(angles_deg), strict=True):
            block[position] = part
    return out
