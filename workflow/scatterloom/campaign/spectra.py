"""Optical constants over wavelength, from a CSV file or from the configuration."""

from __future__ import annotations

import csv
import math
from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from scatterloom.campaign.document import read_text
from scatterloom.errors import BadInput, Problem

COLUMNS = ("wavelength_um", "n", "k")
_LARGEST_FILE = 16 * 2**20
_RANGES = {"wavelength_um": (1e-3, 1e6), "n": (0.01, 10.0), "k": (0.0, 10.0)}


@dataclass(frozen=True)
class Spectrum:
    """Refractive index n + ik at ascending wavelengths [um], each `float (n_row,)`."""

    wavelength_um: Sequence[float]
    n: Sequence[float]
    k: Sequence[float]

    def covers(self, wavelength_um: float) -> bool:
        """Return whether a wavelength lies within the rows."""
        return self.wavelength_um[0] <= wavelength_um <= self.wavelength_um[-1]

    def at(self, wavelength_um: float) -> tuple[float, float]:
        """Return n and k, interpolated linearly in the logarithm of wavelength.

        Raises
        ------
        ValueError
            If the wavelength lies outside the rows: nothing is extrapolated.
        """
        if not self.covers(wavelength_um):
            raise ValueError(f"{wavelength_um:g} um lies outside the optical constants")
        rows = self.wavelength_um
        upper = bisect_left(rows, wavelength_um)
        if rows[upper] == wavelength_um:
            return self.n[upper], self.k[upper]
        lower = upper - 1
        weight = math.log(wavelength_um / rows[lower]) / math.log(rows[upper] / rows[lower])
        return (
            self.n[lower] + weight * (self.n[upper] - self.n[lower]),
            self.k[lower] + weight * (self.k[upper] - self.k[lower]),
        )


def read_spectrum(path: Path, shown: str) -> Spectrum:
    """Read a CSV file with the header `wavelength_um,n,k`; lines from # on are comments.

    Raises
    ------
    BadInput
        With every fault of the file, by file and line.
    """
    text = read_text(path, shown, _LARGEST_FILE)
    problems: list[Problem] = []
    rows: list[tuple[float, float, float]] = []
    header: list[str] | None = None
    for number, line in enumerate(text.splitlines(), start=1):
        content = line.split("#", 1)[0].strip()
        if not content:
            continue
        try:
            cells = [cell.strip() for cell in next(csv.reader([content]))]
        except (csv.Error, StopIteration):
            cells = [content]
        if header is None:
            header = cells
            if tuple(cells) != COLUMNS:
                hint = "the first line must be the header 'wavelength_um,n,k'"
                raise BadInput(
                    [Problem(shown, number, 1, "wrong header", repr(content[:60]), hint)]
                )
            continue
        row, faults = _row(cells, number, shown)
        problems += faults
        if row is None:
            continue
        if rows and row[0] <= rows[-1][0]:
            message = f"wavelength_um {row[0]:g} does not exceed the row before ({rows[-1][0]:g})"
            hint = "give every wavelength once, in ascending order"
            problems.append(Problem(shown, number, 1, message, hint=hint))
        rows.append(row)
    if not rows and not problems:
        hint = "give the header 'wavelength_um,n,k' and one row for each wavelength"
        problems.append(Problem(shown, None, None, "the table has no rows", hint=hint))
    if problems:
        raise BadInput(problems)
    wavelength, n, k = zip(*rows, strict=True)
    return Spectrum(wavelength, n, k)


def _row(
    cells: list[str], number: int, shown: str
) -> tuple[tuple[float, float, float] | None, list[Problem]]:
    if len(cells) != len(COLUMNS):
        found = f"{len(cells)} cells"
        hint = "give three: wavelength_um,n,k"
        return None, [Problem(shown, number, 1, "wrong number of cells", found, hint)]
    values: list[float] = []
    problems: list[Problem] = []
    for name, cell in zip(COLUMNS, cells, strict=True):
        low, high = _RANGES[name]
        unit = " um" if name == "wavelength_um" else ""
        try:
            value = float(cell)
        except ValueError:
            value = math.nan
        if not low <= value <= high:
            message = f"{name} is not a number" if math.isnan(value) else f"{name} is out of range"
            hint = f"give a number from {low:g} to {high:g}{unit}"
            if name == "k":
                hint += "; absorption is a positive k: the index is n + ik"
            problems.append(Problem(shown, number, 1, message, repr(cell[:60]), hint))
        values.append(value)
    if problems:
        return None, problems
    return (values[0], values[1], values[2]), []
