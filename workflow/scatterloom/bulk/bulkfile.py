"""bulk.zarr: written and published like a table, opened only when it is whole."""

from __future__ import annotations

import contextlib
import hashlib
import warnings
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import zarr

from scatterloom.bulk import schema
from scatterloom.bulk.population import Population
from scatterloom.errors import IntegrityError
from scatterloom.store.atomic import sweep_abandoned
from scatterloom.store.commit import COMMIT, commit_record, publish, staging, verify_folder
from scatterloom.store.provenance import now
from scatterloom.store.writer import ShardedArray

if TYPE_CHECKING:
    import xarray

KIND = "bulk"
COMMIT_FILE = COMMIT
_OWN = ("title", "summary", "id", "history", "date_created", "content_digest", "error_statement")


def write_bulk(
    path: Path, columns: Mapping[str, np.ndarray], table_attributes: Mapping[str, Any]
) -> bool:
    """Publish bulk properties at `path`; an equal, intact file is left alone.

    Parameters
    ----------
    path : Path
        A `bulk.zarr` folder.
    columns : mapping of str to array
        Every variable of `bulk.schema`, as `build` makes them.
    table_attributes : mapping
        Global attributes of the table they come from; configuration, conventions and
        versions are taken over.

    Returns
    -------
    bool
        Whether it was written.

    Raises
    ------
    OSError
        From the file system; what stood at `path` is untouched.
    """
    sweep_abandoned(path.parent)
    attributes = {name: v for name, v in table_attributes.items() if name not in _OWN}
    source = str(table_attributes.get("content_digest", "unknown"))
    attributes |= {
        "title": f"Bulk properties: {table_attributes.get('title', '')}",
        "summary": "Optical properties of particle populations, averaged from the campaign's table",
        "table_content_digest": source,
        "error_statement": schema.ERROR_MODEL,
    }
    digest = _digest(columns, source)
    with contextlib.suppress(IntegrityError):
        if commit_record(path)["content_digest"] == digest:
            verify_folder(path)
            return False
    with staging(path) as folder:
        group = zarr.open_group(folder, mode="w", zarr_format=3)
        for variable in schema.variables():
            content = columns[variable.name]
            ShardedArray(group, variable, content.shape).write_all(content)
        date = now()
        group.attrs.update({**attributes, "date_created": date, "content_digest": digest})
        with warnings.catch_warnings():
            # Consolidated metadata is not in the Zarr 3 specification; readers that do not
            # know it ignore it.
            warnings.filterwarnings("ignore", message="Consolidated metadata", module="zarr")
            zarr.consolidate_metadata(group.store)
        publish(folder, path, KIND, digest, date)
    return True


def _digest(columns: Mapping[str, np.ndarray], source: str) -> str:
    whole = hashlib.sha256(source.encode())
    for variable in schema.variables():
        content = columns[variable.name]
        whole.update(f"{variable.name} {content.shape}".encode())
        if variable.dtype == "string":
            whole.update("\0".join(str(text) for text in content).encode())
        else:
            whole.update(np.ascontiguousarray(content).tobytes())
    return whole.hexdigest()


def open_bulk(path: Path | str) -> xarray.Dataset:
    """Open bulk properties that are complete and as they were committed.

    Parameters
    ----------
    path : path
        A `bulk.zarr` folder.

    Returns
    -------
    xarray.Dataset

    Raises
    ------
    IntegrityError
        Naming each file that is wrong, or saying that it was never committed.
    """
    import xarray

    path = Path(path)
    kind = commit_record(path).get("kind")
    if kind != KIND:
        raise IntegrityError(f"{path}: a committed {kind}, not bulk properties")
    verify_folder(path)
    return xarray.open_zarr(path)


def bulk_of(path: Path, table: xarray.Dataset, populations: Sequence[Population]) -> xarray.Dataset:
    """Open the bulk properties that belong to a table and to a campaign's populations.

    Parameters
    ----------
    path : Path
        A `bulk.zarr` folder.
    table : xarray.Dataset
        The opened table.
    populations : sequence of Population
        What the campaign names.

    Returns
    -------
    xarray.Dataset
        Its populations are those given, in the same order.

    Raises
    ------
    IntegrityError
        If they are missing, altered, or of another table or other populations.
    """
    hint = "\n  hint: run 'scatterloom bulk' again"
    if not path.exists():
        raise IntegrityError(f"{path}: not written yet{hint}")
    bulk = open_bulk(path)
    if bulk.attrs.get("table_content_digest") != table.attrs.get("content_digest"):
        raise IntegrityError(f"{path}: made from another table than the one beside it{hint}")
    names = [str(name) for name in bulk["population"].values]
    if names != [population.name for population in populations]:
        raise IntegrityError(f"{path}: holds other populations than the campaign{hint}")
    return bulk
