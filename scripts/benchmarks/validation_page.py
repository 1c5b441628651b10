"""The validation page: a template by hand, its figures from the benchmarks' results."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined

from benchmarks.output import markdown_table
from scatterloom.store.atomic import atomic_write

TEMPLATE = "validation.md.j2"
MEASURED = ("calibration", "convergence", "accuracy_asked")
"""Benchmarks that make up the validation."""
QUOTED = (*MEASURED, "solve")
"""Benchmarks whose results the page quotes."""


def _signed(value: float, digits: int) -> str:
    """With a proper minus sign."""
    return f"{value:.{digits}f}".replace("-", "\N{MINUS SIGN}")


def render(folder: Path) -> str:
    """Text of the page from the results in a folder.

    Raises
    ------
    FileNotFoundError
        If a benchmark that the page quotes has not been run.
    """
    results: dict[str, Mapping[str, Any]] = {
        name: json.loads((folder / f"{name}.json").read_text(encoding="utf-8")) for name in QUOTED
    }
    environment = Environment(
        loader=FileSystemLoader(Path(__file__).parent),
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        autoescape=False,
    )
    environment.filters["signed"] = _signed
    environment.filters["table"] = lambda rows: "\n".join(markdown_table(rows))
    return environment.get_template(TEMPLATE).render(**results)


def write_page(folder: Path) -> Path:
    """Write validation.md beside the folder of the results."""
    path = folder.parent / "validation.md"
    with atomic_write(path) as stream:
        stream.write(render(folder).encode())
    return path
