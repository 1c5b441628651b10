"""Show a result as a table; keep it as JSON, as a page for readers and as a picture."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from scatterloom.store.atomic import atomic_write


@dataclass(frozen=True)
class Result:
    """What a benchmark found.

    Attributes
    ----------
    rows : list of dict
        One dict per row of the table, plain values, the same keys in each.
    notes : list of str
        What a reader must know to judge the figures.
    draw : callable(path) or None
        Draws the picture.
    more : mapping of str to list of dict
        Further tables by title.
    """

    rows: Sequence[Mapping[str, Any]]
    notes: Sequence[str] = ()
    draw: Callable[[Path], None] | None = field(default=None, repr=False)
    more: Mapping[str, Sequence[Mapping[str, Any]]] = field(default_factory=dict)


def table(rows: Sequence[Mapping[str, Any]]) -> list[str]:
    """Lines of a table with aligned columns; numbers to three digits."""
    if not rows:
        return []
    names = list(rows[0])
    cells = [[name.replace("_", " ") for name in names]]
    cells += [[_text(row[name]) for name in names] for row in rows]
    widths = [max(len(line[i]) for line in cells) for i in range(len(names))]
    return ["  ".join(c.rjust(w) for c, w in zip(line, widths, strict=True)) for line in cells]


def _text(value: Any) -> str:
    if value is None:
        return "-"
    if isinstance(value, float):
        return f"{value:.3g}"
    return str(value)


def markdown_table(rows: Sequence[Mapping[str, Any]]) -> list[str]:
    """Lines of a table in Markdown; a bar in a text must not end its cell."""
    names = list(rows[0])
    lines = ["| " + " | ".join(key.replace("_", " ") for key in names) + " |"]
    lines.append("|" + "---:|" * len(names))
    for row in rows:
        lines.append("| " + " | ".join(_text(row[k]).replace("|", "\\|") for k in names) + " |")
    return lines


def page(
    name: str, title: str, machine: Mapping[str, Any], result: Result, picture: bool
) -> list[str]:
    """Lines of a Markdown page with the table, what it means and where it was measured."""
    lines = [
        f"<!-- Made by `scripts/bench {name}`; run it again instead of editing this page. -->",
        f"# Benchmark: {name}",
        "",
        f"{title[0].upper()}{title[1:]}.",
        "",
    ]
    lines += markdown_table(result.rows)
    for heading, rows in result.more.items():
        lines += ["", f"## {heading[0].upper()}{heading[1:]}", "", *markdown_table(rows)]
    lines += ["", *(f"- {note}" for note in result.notes), ""]
    if picture:
        lines += [f"![{title}]({name}.png)", ""]
    pools = ", ".join(
        f"{p['internal_api']} {p['version']} ({p.get('architecture', 'architecture not known')})"
        for p in machine["linear_algebra"]
    )
    settings = ", ".join(f"{k}={v}" for k, v in machine["environment"].items()) or "none"
    versions = ", ".join(f"{k} {v}" for k, v in machine["versions"].items())
    lines += [
        f"Measured {machine['date']} on {machine['processor']}, {machine['cores']} cores, "
        f"{machine['threads']} used; load average before the start {machine['load_average']}. "
        f"Linear algebra: {pools}; settings in force: {settings}. Versions: {versions}.",
        "",
        f"The same figures to full precision: [{name}.json]({name}.json).",
    ]
    return lines


def write_result(
    folder: Path, name: str, title: str, machine: Mapping[str, Any], result: Result
) -> None:
    """Print a result; write NAME.json, NAME.md and, where there is something to see, NAME.png."""
    print("\n".join(table(result.rows)))
    for heading, rows in result.more.items():
        print(f"\n{heading}", *table(rows), sep="\n")
    for note in result.notes:
        print(f"- {note}")
    content = {
        "benchmark": name,
        "machine": machine,
        "rows": result.rows,
        "more": result.more,
        "notes": result.notes,
    }
    text = json.dumps(content, indent=1, allow_nan=False) + "\n"
    listed = "\n".join(page(name, title, machine, result, result.draw is not None)) + "\n"
    for suffix, body in (("json", text), ("md", listed)):
        with atomic_write(folder / f"{name}.{suffix}") as stream:
            stream.write(body.encode())
    if result.draw is not None:
        result.draw(folder / f"{name}.png")
