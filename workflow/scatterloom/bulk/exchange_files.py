"""Files for radiative transfer: NetCDF-4 and plain text, written whole, checked by reading."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from scatterloom.bulk.coefficients import NAMES, evaluate
from scatterloom.bulk.exchange import SCALARS, SERIES_COMMENT, SIGN_COMMENT
from scatterloom.errors import IntegrityError
from scatterloom.scattering.record import has_result
from scatterloom.store.atomic import atomic_write, temporary_beside

if TYPE_CHECKING:
    import xarray

INDEX = "exchange.json"
FORMAT = "Scatterloom expansion coefficients, text format 1"
_UNITS = {
    "extinction_cross_section": "um2",
    "extinction_per_volume": "um-1",
    "extinction_per_mass": "m2 g-1",
    "backscatter_cross_section": "um2 sr-1",
}


@dataclass(frozen=True)
class TextTable:
    """Content of a text file.

    Attributes
    ----------
    header : dict of str to str
        The lines `# name: value`.
    degree : int64 (n_degree,)
    coefficients : float64 (n_degree, 6)
        Columns a1, a2, a3, a4, b1, b2.
    """

    header: dict[str, str]
    degree: np.ndarray
    coefficients: np.ndarray


def write_exchange(folder: Path, dataset: xarray.Dataset, bulk: xarray.Dataset) -> list[str]:
    """Write all files, read them back and compare, then write the index.

    Parameters
    ----------
    folder : Path
        The index is taken away first, so that it never names files of two tables; files
        that it no longer names are removed.
    dataset : xarray.Dataset
        As `exchange_dataset` makes it.
    bulk : xarray.Dataset
        The bulk properties that it was made from.

    Returns
    -------
    list of str
        Names of the files.

    Raises
    ------
    IntegrityError
        If what is read back does not give the matrices of `bulk` to the truncation error.
    OSError
        From the file system.
    """
    folder.mkdir(parents=True, exist_ok=True)
    (folder / INDEX).unlink(missing_ok=True)
    name = f"{dataset.attrs.get('campaign', 'campaign')}.nc"
    write_netcdf(folder / name, dataset)
    files = [name]
    known = has_result(dataset["status"].values)
    for i, w in np.argwhere(known):
        cell = dataset.isel(population=int(i), wavelength=int(w))
        stem = f"{cell['population'].item()}-{float(cell['wavelength']):g}um"
        for ending, text in (("", text_table(cell)), ("-delta-m", scaled_table(cell))):
            with atomic_write(folder / f"{stem}{ending}.txt") as stream:
                stream.write(text.encode())
            files.append(f"{stem}{ending}.txt")
        _check(folder / name, folder / f"{stem}.txt", int(i), int(w), bulk)
    for path in folder.iterdir():
        if path.suffix in (".nc", ".txt") and path.name not in files:
            path.unlink()
    truncation = dataset["truncation_error"].values
    index = {
        "table_content_digest": str(dataset.attrs.get("table_content_digest", "")),
        "files": files,
        "largest_truncation_error": float(np.nanmax(truncation)) if known.any() else None,
    }
    with atomic_write(folder / INDEX) as stream:
        stream.write(json.dumps(index, indent=1).encode())
    return files


def write_netcdf(path: Path, dataset: xarray.Dataset) -> None:
    """Write a dataset as NetCDF-4 under a temporary name, then rename it."""
    temporary = temporary_beside(path)
    encoding: dict[str, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        kind = variable.dtype.kind
        # A fill value belongs to data only: coordinates have no holes.
        fill = float("nan") if kind == "f" and name not in dataset.coords else None
        encoding[str(name)] = {"_FillValue": fill} if kind != "O" else {"dtype": str}
    try:
        dataset.to_netcdf(temporary, format="NETCDF4", engine="netcdf4", encoding=encoding)
        with open(temporary, "rb") as stream:
            os.fsync(stream.fileno())
        os.replace(temporary, path)
    finally:
        temporary.unlink(missing_ok=True)


def text_table(cell: xarray.Dataset) -> str:
    """Coefficients and half widths of one population at one wavelength as text."""
    count = int(cell["last_degree"]) + 1
    values = np.stack([cell[n].values[:count] for n in NAMES], axis=1)
    errors = np.stack([cell[f"{n}_error"].values[:count] for n in NAMES], axis=1)
    lines = [
        *_head(cell),
        f"# truncation_error: {float(cell['truncation_error']):.3e}",
        f"# series: {SERIES_COMMENT}",
        f"# columns: degree {' '.join(NAMES)} {' '.join(f'{n}_error' for n in NAMES)}",
    ]
    return _body(lines, np.hstack([values, errors]))


def scaled_table(cell: xarray.Dataset) -> str:
    """The same, scaled by delta-M."""
    values = np.stack([cell[f"{n}_scaled"].values for n in NAMES], axis=1)
    lines = [
        *_head(cell),
        f"# delta_m_streams: {len(values)}",
        *(
            f"# {name}: {float(cell[name])!r}"
            for name in (
                *("forward_fraction", "scaled_single_scattering_albedo"),
                "scaled_extinction_cross_section",
            )
        ),
        f"# series: {SERIES_COMMENT}; scaled by delta-M (Wiscombe 1977): use it with the scaled "
        "albedo and extinction",
        f"# columns: degree {' '.join(NAMES)}",
    ]
    return _body(lines, values)


def _head(cell: xarray.Dataset) -> list[str]:
    attributes: Mapping[str, Any] = cell.attrs
    lines = [
        f"# {FORMAT}",
        f"# campaign: {attributes.get('campaign', '')}",
        f"# population: {cell['population'].item()}",
        f"# wavelength_um: {float(cell['wavelength'])!r}",
        f"# table_content_digest: {attributes.get('table_content_digest', '')}",
        f"# licence: {attributes.get('license', 'not stated')}",
    ]
    for name in SCALARS:
        value, half_width = float(cell[name]), float(cell[f"{name}_error"])
        if np.isfinite(value):
            unit = _UNITS.get(name, "1")
            lines.append(f"# {name}: {value!r} +- {half_width:.3e} {unit}")
    return [*lines, f"# signs: {SIGN_COMMENT}", "# +- and _error: half widths, 95 % of each part"]


def _body(lines: list[str], values: np.ndarray) -> str:
    rows = [
        f"{degree:5d} " + " ".join(f"{value:24.16e}" for value in row)
        for degree, row in enumerate(values)
    ]
    return "\n".join([*lines, *rows]) + "\n"


def read_text(path: Path) -> TextTable:
    """Read a text table.

    Raises
    ------
    IntegrityError
        If it is no such table, or cut.
    """
    text = path.read_text(encoding="utf-8")
    comments = [line[2:] for line in text.splitlines() if line.startswith("# ")]
    if not comments or comments[0] != FORMAT or not text.endswith("\n"):
        raise IntegrityError(f"{path}: not a whole table of expansion coefficients")
    header = dict(line.split(": ", 1) for line in comments[1:] if ": " in line)
    try:
        rows = np.loadtxt(path, ndmin=2)
        width = len(header["columns"].split())
    except (ValueError, KeyError):
        raise IntegrityError(f"{path}: unreadable rows") from None
    if rows.shape[1] != width or not np.array_equal(rows[:, 0], np.arange(len(rows))):
        raise IntegrityError(f"{path}: rows are missing or cut")
    return TextTable(header, rows[:, 0].astype(int), rows[:, 1 : 1 + len(NAMES)])


def _check(netcdf: Path, text: Path, i: int, w: int, bulk: xarray.Dataset) -> None:
    """Sum the series of the files again and compare with the matrix they came from."""
    import xarray

    with xarray.open_dataset(netcdf, engine="netcdf4") as dataset:
        cell = dataset.isel(population=i, wavelength=w).load()
    angles = np.asarray(bulk["angle"].values, dtype=np.float64)
    matrix = np.asarray(bulk["scattering_matrix"].isel(population=i, wavelength=w).values)
    scale = 1.0 + float(cell["normalization_defect"])
    allowed = 1.01 * float(cell["truncation_error"]) + 1e-12
    stored = np.stack([cell[n].values for n in NAMES], axis=1)
    for path, coefficients in ((netcdf, stored), (text, read_text(text).coefficients)):
        again = scale * evaluate(coefficients, angles)
        apart = float((np.abs(again - matrix) / matrix[:, :1, :1]).max())
        if not apart <= allowed:
            raise IntegrityError(
                f"{path}: the series sums to a matrix {apart:.2e} off, more than its truncation "
                f"error of {allowed:.2e}"
            )
