"""The table of a campaign: gathered from case files, published whole, opened checked."""

from __future__ import annotations

import contextlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np

from scatterloom.errors import IntegrityError
from scatterloom.scattering.record import STATUS_MEANINGS
from scatterloom.store.assemble import Cases
from scatterloom.store.atomic import sweep_abandoned
from scatterloom.store.commit import commit_record, publish, staging, verify_folder
from scatterloom.store.provenance import About, global_attributes, now
from scatterloom.store.writer import Axes, write_hierarchy

if TYPE_CHECKING:
    import xarray

KIND = "table"


@dataclass(frozen=True)
class Gathered:
    """What `gather` did.

    Attributes
    ----------
    path : Path
        The table.
    content_digest : str
        SHA-256 over arrays and attributes, without dates and timings.
    replaced : bool
        False if an equal table stood there already and was left alone.
    cells : dict of str to int
        Cells of the table by the meaning of their status.
    """

    path: Path
    content_digest: str
    replaced: bool
    cells: dict[str, int]


def gather(
    path: Path, axes: Axes, cases: Cases, about: About, warning_flags: Mapping[str, tuple[int, str]]
) -> Gathered:
    """Write the table `path` from the published case files.

    An intact table of equal content is left as it is, dates included. Otherwise the
    new table takes the name only when all of it is on disk.

    Raises
    ------
    IntegrityError
        If a case file is damaged or lacks a case.
    OSError
        From the file system; the table that stood there is untouched.
    """
    sweep_abandoned(path.parent)
    attributes = global_attributes(about, axes.particles, axes.wavelength_um.tolist())
    with staging(path) as folder:
        digest, status = write_hierarchy(folder, axes, cases, attributes, warning_flags)
        replaced = not _holds(path, digest)
        if replaced:
            publish(folder, path, KIND, digest, now())
    counts = np.bincount(status.ravel(), minlength=len(STATUS_MEANINGS))
    cells = dict(zip(STATUS_MEANINGS, counts.tolist(), strict=True))
    return Gathered(path, digest, replaced, cells)


def _holds(path: Path, content_digest: str) -> bool:
    with contextlib.suppress(IntegrityError):
        if commit_record(path)["content_digest"] == content_digest:
            verify_folder(path)
            return True
    return False


def verify(path: Path | str) -> None:
    """Check every file of a table against its committed manifest.

    Raises
    ------
    IntegrityError
        Naming each file that is missing, foreign, altered or cut, or saying that the
        table was never committed.
    """
    path = Path(path)
    record = commit_record(path)
    if record.get("kind") != KIND:
        raise IntegrityError(f"{path}: a committed {record.get('kind')}, not a {KIND}")
    verify_folder(path)


def open_table(
    path: Path | str, *, digests: bool = True, chunks: Literal["auto"] | None = "auto"
) -> xarray.Dataset:
    """Open a table that is complete and as it was committed; refuse any other.

    Parameters
    ----------
    path : path
        A `table.zarr` folder.
    digests : bool
        Whether to read and digest every file first. Without it, names, lengths and
        metadata are compared and each chunk's checksum is tested when it is read.
    chunks : "auto" or None
        Whether arrays are those of dask, which compute chunk by chunk, or read what is
        asked of them when it is asked.

    Returns
    -------
    xarray.Dataset
        Loaded lazily.

    Raises
    ------
    IntegrityError
        Naming each file that is wrong, or saying that the table was never committed.
    """
    import xarray

    path = Path(path)
    if digests:
        verify(path)
    else:
        verify_folder(path, digests=False)
    return xarray.open_zarr(path, chunks=chunks)
