"""Lines of CSV files that users write: header, comments, positions for messages."""

from __future__ import annotations

import csv
import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from scatterloom.campaign.document import read_text
from scatterloom.errors import BadInput, Problem

LARGEST_FILE = 64 * 2**20


@dataclass(frozen=True)
class Sheet:
    """A CSV file cut into cells.

    Attributes
    ----------
    file : str
        File name as the user gave it.
    header_line : int
        Line of the header, from 1.
    header : tuple of str
        Names of the columns.
    rows : tuple of (int, tuple of str)
        Line and cells of every row.
    """

    file: str
    header_line: int
    header: tuple[str, ...]
    rows: tuple[tuple[int, tuple[str, ...]], ...]


def read_sheet(path: Path, shown: str, example: str) -> Sheet:
    """Cut a CSV file into cells; text from # on is a comment.

    Parameters
    ----------
    path : Path
    shown : str
        File name for messages.
    example : str
        A header as it should be, for hints.

    Raises
    ------
    BadInput
        If the file cannot be read, has no header or no rows, or a row is too short or long.
    """
    lines = []
    for number, line in enumerate(read_text(path, shown, LARGEST_FILE).splitlines(), start=1):
        content = line.split("#", 1)[0].strip()
        if not content:
            continue
        try:
            cells = tuple(cell.strip() for cell in next(csv.reader([content])))
        except (csv.Error, StopIteration):
            cells = (content,)
        lines.append((number, cells))
    if len(lines) < 2:
        what = "the table has no rows" if lines else "the file holds no table"
        hint = f"give the header '{example}' and a row for each point"
        raise BadInput([Problem(shown, None, None, what, hint=hint)])
    (header_line, header), *rows = lines
    problems = [
        Problem(
            shown,
            number,
            1,
            "wrong number of cells",
            f"{len(cells)} cells",
            f"give {len(header)}: {','.join(header)}",
        )
        for number, cells in rows
        if len(cells) != len(header)
    ]
    if problems:
        raise BadInput(problems)
    return Sheet(shown, header_line, header, tuple(rows))


def numbers(
    sheet: Sheet, column: int, low: float, high: float, unit: str = "", blank: bool = False
) -> tuple[list[float], list[Problem]]:
    """Read one column as numbers.

    Parameters
    ----------
    sheet : Sheet
    column : int
    low, high : float
        Range allowed, ends included.
    unit : str
    blank : bool
        Whether an empty cell means "not measured" and becomes NaN.

    Returns
    -------
    values : list of float
        NaN where a cell is blank or wrong.
    problems : list of Problem
    """
    values, problems = [], []
    name = sheet.header[column]
    for line, cells in sheet.rows:
        text = cells[column]
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not low <= value <= high and not (blank and text == ""):
            message = f"{name} is not a number" if math.isnan(value) else f"{name} is out of range"
            hint = f"give a number from {low:g} to {high:g}{' ' + unit if unit else ''}"
            hint += ", or leave the cell empty" if blank else ""
            problems.append(Problem(sheet.file, line, 1, message, repr(text[:60]), hint))
            value = math.nan
        values.append(value)
    return values, problems


def wrong_header(sheet: Sheet, message: str, hint: str) -> Problem:
    """Make a problem of the header."""
    found = repr(",".join(sheet.header)[:60])
    return Problem(sheet.file, sheet.header_line, 1, message, found, hint)


def not_ascending(sheet: Sheet, name: str, values: Sequence[float]) -> list[Problem]:
    """Complain of every value that does not exceed the one before."""
    return [
        Problem(
            sheet.file,
            sheet.rows[i][0],
            1,
            f"{name} {values[i]:g} does not exceed the row before ({values[i - 1]:g})",
            hint="give every value once, in ascending order",
        )
        for i in range(1, len(values))
        if values[i] <= values[i - 1]
    ]
