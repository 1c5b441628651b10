"""A picture with the words and numbers that go with it, and how it becomes files."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from importlib.resources import as_file, files
from pathlib import Path
from typing import Any

import matplotlib
from matplotlib.figure import Figure

from scatterloom.errors import IntegrityError
from scatterloom.store.atomic import atomic_write

INDEX = "figures.json"
ENDINGS = ("png", "svg", "pdf", "csv")
BAND = "Bands are 95 % half widths."

SERIES = (
    ("#0058a3", "-", "o"),
    ("#c04a00", "--", "s"),
    ("#00704f", "-.", "^"),
    ("#8b2f77", ":", "D"),
    ("#222222", (0, (5, 1, 1, 1, 1, 1)), "v"),
)
"""Colour, line style and marker of each series: no two series differ by colour alone."""


@dataclass(frozen=True)
class Picture:
    """One figure before it is saved.

    Attributes
    ----------
    stem : str
        File name without ending.
    title, caption, alt : str
        Title; caption, which says what bands and marks are; text for who cannot see it.
    figure : matplotlib.figure.Figure
    header : sequence of str
        Column names, with units, of the numbers behind the picture.
    rows : sequence of sequence
        The numbers.
    """

    stem: str
    title: str
    caption: str
    alt: str
    figure: Figure
    header: Sequence[str]
    rows: Sequence[Sequence[Any]]


@contextmanager
def style() -> Iterator[None]:
    """Draw and save inside this context; it leaves global settings alone."""
    with as_file(files("scatterloom.figures") / "scatterloom.mplstyle") as path:
        settings = matplotlib.rc_params_from_file(path, use_default_template=True)
    # Figures are made without the state machine of pyplot, so that no backend is chosen.
    with matplotlib.rc_context({k: v for k, v in settings.items() if k != "backend"}):
        yield


def save(picture: Picture, folder: Path) -> dict[str, str]:
    """Write PNG, SVG, PDF and the numbers as CSV; equal input gives equal bytes.

    Parameters
    ----------
    picture : Picture
    folder : Path

    Returns
    -------
    dict of str to str
        Entry for the index: file names, title, caption, alternative text.

    Raises
    ------
    OSError
        From the file system; no file is left half written.
    """
    # Laid out once; with a layout engine each format would draw twice.
    picture.figure.draw_without_rendering()
    picture.figure.set_layout_engine("none")
    png, svg, pdf = io.BytesIO(), io.BytesIO(), io.BytesIO()
    picture.figure.savefig(png, format="png", metadata={"Software": None})
    nothing = dict.fromkeys(("Creator", "Date", "Format", "Type"))
    picture.figure.savefig(svg, format="svg", metadata=nothing)
    picture.figure.savefig(pdf, format="pdf", metadata={"CreationDate": None, "Producer": None})
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(picture.header)
    writer.writerows([[_plain(value) for value in row] for row in picture.rows])
    contents = {
        "png": png.getvalue(),
        "svg": svg.getvalue(),
        "pdf": pdf.getvalue(),
        "csv": text.getvalue().encode(),
    }
    for ending, content in contents.items():
        with atomic_write(folder / f"{picture.stem}.{ending}") as stream:
            stream.write(content)
    names = {ending: f"{picture.stem}.{ending}" for ending in contents}
    words = {"title": picture.title, "caption": picture.caption, "alt": picture.alt}
    return {"name": picture.stem, **names, **words}


def _plain(value: Any) -> Any:
    if isinstance(value, str | int):
        return value
    return "" if value is None or value != value else f"{float(value):.5g}"


def write_index(
    folder: Path, entries: Sequence[dict[str, str]], notes: Sequence[str], table_digest: str
) -> None:
    """Write the index of a folder of figures, after everything it names.

    Parameters
    ----------
    folder : Path
    entries : sequence of dict
        What `save` returned, in the order of presentation.
    notes : sequence of str
        What was not drawn, and why.
    table_digest : str
        Content digest of the table that the figures show.
    """
    index = {"table_content_digest": table_digest, "figures": list(entries), "notes": list(notes)}
    with atomic_write(folder / INDEX) as stream:
        stream.write(json.dumps(index, indent=1).encode())


def read_index(folder: Path, table_digest: str) -> dict[str, Any]:
    """Read the index of a folder of figures.

    Parameters
    ----------
    folder : Path
    table_digest : str
        Content digest of the table that the figures must show.

    Returns
    -------
    dict
        figures (list of dict) and notes (list of str).

    Raises
    ------
    IntegrityError
        If there is no index, if it is of another table, or if a file it names is missing.
    """
    path = folder / INDEX
    hint = "\n  hint: run 'scatterloom figures' again"
    try:
        index: dict[str, Any] = json.loads(path.read_bytes())
        digest, figures = index["table_content_digest"], index["figures"]
    except FileNotFoundError:
        raise IntegrityError(f"{path}: not written yet{hint}") from None
    except (ValueError, KeyError, TypeError):
        raise IntegrityError(f"{path}: unreadable{hint}") from None
    if digest != table_digest:
        raise IntegrityError(f"{path}: figures of another table than the one beside them{hint}")
    for entry in figures:
        for ending in ENDINGS:
            if not (folder / entry[ending]).is_file():
                raise IntegrityError(f"{folder / entry[ending]}: missing{hint}")
    return index
