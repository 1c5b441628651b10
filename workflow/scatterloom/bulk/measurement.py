"""Measured scattering matrices, from CSV or NetCDF.

One row for each angle and wavelength. F11 is on any scale, one for each wavelength; errors
are standard deviations. Elements that were not measured are left out, single values left
empty.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from scatterloom.campaign.csvfile import LARGEST_FILE, Sheet, numbers, read_sheet, wrong_header
from scatterloom.errors import BadInput, Problem

FloatArray = NDArray[np.float64]

BRIGHTNESS = "F11"
RATIOS: dict[str, tuple[int, int]] = {
    "F12/F11": (0, 1),
    "F22/F11": (1, 1),
    "F33/F11": (2, 2),
    "F34/F11": (2, 3),
    "F44/F11": (3, 3),
}
"""Ratios that can be measured, and where the element stands in the matrix (from 0)."""

_MOST_ROWS = 1_000_000
_NEGATIVE = ("-F12/F11", "minus_F12_F11")
_EXAMPLE = "angle_deg,wavelength_um,F11,F11_error,-F12/F11,-F12/F11_error"


@dataclass(frozen=True)
class Measurement:
    """A measured scattering matrix.

    Attributes
    ----------
    file : str
        Name for messages.
    wavelength_um, angle_deg : float64 (n_row,)
    values, errors : dict of str to float64 (n_row,)
        By element ("F11", "F12/F11", ...); NaN where not measured. Errors are standard
        deviations.
    """

    file: str
    wavelength_um: FloatArray
    angle_deg: FloatArray
    values: Mapping[str, FloatArray]
    errors: Mapping[str, FloatArray]

    @property
    def wavelengths(self) -> list[float]:
        """The distinct wavelengths [um], ascending."""
        return [float(w) for w in np.unique(self.wavelength_um)]

    def at(self, wavelength_um: float) -> Measurement:
        """Return the rows of one wavelength, by angle."""
        rows = np.flatnonzero(self.wavelength_um == wavelength_um)
        rows = rows[np.argsort(self.angle_deg[rows], kind="stable")]
        return Measurement(
            self.file,
            self.wavelength_um[rows],
            self.angle_deg[rows],
            {name: value[rows] for name, value in self.values.items()},
            {name: error[rows] for name, error in self.errors.items()},
        )


def read_measurement(path: Path | str) -> Measurement:
    """Read a measurement; the ending of the name tells the format (.nc, .csv or other text).

    Raises
    ------
    BadInput
        With every fault, by file and line.
    """
    path = Path(path)
    if not path.is_file():
        raise BadInput([Problem(str(path), None, None, "no such file")])
    if path.suffix in (".nc", ".nc4", ".cdf"):
        return _from_sheet(_netcdf_sheet(path))
    return _from_sheet(read_sheet(path, str(path), _EXAMPLE))


def _canonical(name: str) -> tuple[str, float] | None:
    """Element and sign that a column stands for, or None."""
    if name == BRIGHTNESS:
        return name, 1.0
    if name in _NEGATIVE:
        return "F12/F11", -1.0
    spelled = name.replace("_F11", "/F11")
    return (spelled, 1.0) if spelled in RATIOS else None


def _from_sheet(sheet: Sheet) -> Measurement:
    twice = sorted({name for name in sheet.header if sheet.header.count(name) > 1})
    problems = [
        wrong_header(sheet, f"column {name} is given twice", "keep one of them") for name in twice
    ]
    columns: dict[str, tuple[float, int, int]] = {}
    place = {name: i for i, name in enumerate(sheet.header)}
    known = {"angle_deg", "wavelength_um"}
    for name, i in place.items():
        found = _canonical(name)
        if found is None:
            continue
        known |= {name, f"{name}_error"}
        if found[0] in columns:
            problems.append(
                wrong_header(sheet, f"{found[0]} is given twice", "keep one of the columns")
            )
        elif f"{name}_error" not in place:
            hint = f"add the column '{name}_error' with its standard deviations"
            problems.append(wrong_header(sheet, f"column {name} has no errors", hint))
        else:
            columns[found[0]] = (found[1], i, place[f"{name}_error"])
    for name in ("angle_deg", "wavelength_um"):
        if name not in place:
            hint = f"a header such as '{_EXAMPLE}'"
            problems.append(wrong_header(sheet, f"no column {name}", hint))
    for name in place.keys() - known:
        hint = "known are angle_deg, wavelength_um, F11, " + ", ".join((*RATIOS, "-F12/F11"))
        problems.append(wrong_header(sheet, f"unknown column {name!r}", hint + ", NAME_error"))
    if not columns and not problems:
        hint = "add the column F11 or a ratio"
        problems.append(wrong_header(sheet, "nothing was measured", hint))
    if problems:
        raise BadInput(problems)
    angle, faults = numbers(sheet, place["angle_deg"], 0.0, 180.0, "degrees")
    problems += faults
    wavelength, faults = numbers(sheet, place["wavelength_um"], 1e-3, 1e6, "um")
    problems += faults
    values, errors = {}, {}
    for element, (sign, i, j) in columns.items():
        low, high = (1e-300, 1e300) if element == BRIGHTNESS else (-1.5, 1.5)
        value, faults = numbers(sheet, i, low, high, blank=True)
        problems += faults
        error, faults = numbers(sheet, j, 1e-300, 1e300, blank=True)
        problems += faults
        problems += [
            Problem(sheet.file, line, 1, f"{element} has a value or an error but not both")
            for (line, cells) in sheet.rows
            if (cells[i] == "") != (cells[j] == "")
        ]
        values[element], errors[element] = sign * np.array(value), np.array(error)
    problems += _repeated(sheet, angle, wavelength)
    if problems:
        raise BadInput(problems)
    return Measurement(sheet.file, np.array(wavelength), np.array(angle), values, errors)


def _repeated(sheet: Sheet, angle: Sequence[float], wavelength: Sequence[float]) -> list[Problem]:
    first: dict[tuple[float, float], int] = {}
    problems = []
    for (line, _), point in zip(sheet.rows, zip(wavelength, angle, strict=True), strict=True):
        if point in first and not any(math.isnan(part) for part in point):
            message = f"angle {point[1]:g} at {point[0]:g} um is given twice"
            hint = f"first given in line {first[point]}; average repeated measurements"
            problems.append(Problem(sheet.file, line, 1, message, hint=hint))
        first.setdefault(point, line)
    return problems


def _netcdf_sheet(path: Path) -> Sheet:
    """Lay a NetCDF file out as rows: one for each combination of its dimensions."""
    import xarray

    def refuse(message: str, hint: str | None = None) -> BadInput:
        return BadInput([Problem(str(path), None, None, message, hint=hint)])

    try:
        if path.stat().st_size > LARGEST_FILE:
            size = LARGEST_FILE // 2**20
            raise refuse(f"the file is larger than {size} MiB", "is it the right file?")
        with open(path, "rb") as stream:
            kind = stream.read(4)
        if kind == b"CDF\x05":
            raise refuse("NetCDF of 64-bit data is not read", "save it as NetCDF-4 or classic")
        # The C library believes the counts in a classic header and fills the memory; the
        # reader in Python meets the end of the file first.
        engine = "scipy" if kind.startswith(b"CDF") else "netcdf4"
        with xarray.open_dataset(path, engine=engine) as dataset:
            wanted = [
                name
                for name, variable in dataset.variables.items()
                if variable.dtype.kind in "fiu" and _is_known(str(name))
            ]
            dims = {d for name in wanted for d in dataset[name].dims}
            rows_wanted = math.prod(dataset.sizes[d] for d in dims)
            if rows_wanted > _MOST_ROWS:
                raise refuse(f"{rows_wanted} rows are more than {_MOST_ROWS}", "average them first")
            frame = dataset.reset_coords()[wanted].load()
    except BadInput:
        raise
    except Exception as error:
        # Whatever the libraries raise on a damaged file.
        reason = str(error) or type(error).__name__
        raise refuse(f"cannot be read as NetCDF: {reason[:200]}") from None
    names = [str(n) for n, v in frame.variables.items() if v.dtype.kind in "fiu"]
    names = [name for name in names if _is_known(name)]
    flat = xarray.broadcast(*(frame[n] for n in names)) if names else ()
    columns = [np.asarray(v.values, dtype=np.float64).ravel() for v in flat]
    rows = []
    for number, values in enumerate(zip(*columns, strict=True), start=1):
        cells = tuple("" if math.isnan(v) else repr(float(v)) for v in values)
        rows.append((number, cells))
    if not rows:
        message = "the file holds neither angle_deg nor elements such as F11 or F22_F11"
        raise BadInput([Problem(str(path), None, None, message)])
    return Sheet(str(path), 1, tuple(names), tuple(rows))


def _is_known(name: str) -> bool:
    known = name in ("angle_deg", "wavelength_um")
    return known or _canonical(name.removesuffix("_error")) is not None
