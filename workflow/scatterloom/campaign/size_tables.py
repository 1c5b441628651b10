"""Tables of size distributions: read with the campaign file and put into its model."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from scatterloom.campaign.csvfile import not_ascending, numbers, read_sheet, wrong_header
from scatterloom.campaign.document import Document, KeyPath
from scatterloom.campaign.model import CampaignModel
from scatterloom.campaign.populations import Population
from scatterloom.campaign.size_sections import SizePoint
from scatterloom.errors import BadInput, Problem

COLUMNS = ("radius_um", "density")
Points = list[SizePoint]


def read_size_tables(document: Document, folder: Path) -> tuple[dict[str, Points], list[Problem]]:
    """Read every table that a population names, by its name; `folder` is the campaign file's.

    Works on the raw file, so that faults of tables are shown together with all others.
    """
    tables: dict[str, Points] = {}
    problems: list[Problem] = []
    for path, name in named_tables(document):
        try:
            place = folder / name
            if not place.is_file():
                message = f"the size distribution's table '{name}' is no file"
                hint = f"the name is relative to {folder}"
                problems.append(document.problem(path, message, document.show(path), hint))
            elif name not in tables:
                tables[name] = _read(place)
        except BadInput as error:
            problems += error.problems
        except (OSError, ValueError) as error:  # a name no file system accepts
            message = f"the size distribution's table cannot be read: {error}"
            problems.append(document.problem(path, message, document.show(path)))
    return tables, problems


def named_tables(document: Document) -> Iterator[tuple[KeyPath, str]]:
    """Yield the tables that populations name, each with the place where it is named."""
    populations = document.tree.get("populations")
    for position, entry in enumerate(populations if isinstance(populations, list) else ()):
        if not isinstance(entry, dict):
            continue
        sizes: list[tuple[KeyPath, Any]] = [(("size",), entry.get("size"))]
        own = entry.get("sizes")
        sizes += [(("sizes", k), v) for k, v in (own if isinstance(own, dict) else {}).items()]
        for path, size in sizes:
            if isinstance(size, dict) and isinstance(size.get("table"), str) and size["table"]:
                yield ("populations", position, *path, "table"), size["table"]


def _read(place: Path) -> Points:
    sheet = read_sheet(place, str(place), ",".join(COLUMNS))
    if sheet.header != COLUMNS:
        hint = f"the first line must be the header '{','.join(COLUMNS)}'"
        raise BadInput([wrong_header(sheet, "wrong header", hint)])
    radius, problems = numbers(sheet, 0, 1e-6, 1e6, "um")
    density, more = numbers(sheet, 1, 0.0, 1e300)
    problems += more or not_ascending(sheet, "radius_um", radius)
    if not problems and (len(radius) < 2 or not any(density)):
        message = "a distribution needs two rows, and a density above zero"
        problems.append(Problem(sheet.file, None, None, message))
    if problems:
        raise BadInput(problems)
    return [SizePoint(radius_um=r, density=d) for r, d in zip(radius, density, strict=True)]


def with_points(model: CampaignModel, tables: Mapping[str, Points]) -> CampaignModel:
    """Write the rows of all tables into the model, so that it needs no other file."""

    def read(size: Any) -> Any:
        if getattr(size, "table", None) is None:
            return size
        return size.model_copy(update={"table": None, "points": tables[size.table]})

    def filled(population: Population) -> Population:
        sizes = population.sizes and {k: read(v) for k, v in population.sizes.items()}
        return population.model_copy(update={"size": read(population.size), "sizes": sizes})

    return model.model_copy(update={"populations": [filled(p) for p in model.populations]})
