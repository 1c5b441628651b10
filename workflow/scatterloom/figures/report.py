"""The report of a campaign: one HTML page that needs nothing else and loads nothing."""

from __future__ import annotations

import base64
import csv
import io
from collections.abc import Mapping
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from jinja2 import Environment, StrictUndefined

from scatterloom.bulk.listing import NOTHING, SHOWN
from scatterloom.bulk.listing import rows as bulk_rows
from scatterloom.figures.failures import failures
from scatterloom.figures.view import embedded, view_data
from scatterloom.scattering.record import SOLVED, SOLVED_WITH_WARNING, has_result

if TYPE_CHECKING:
    import xarray

TEMPLATE, SCRIPT = "report.html", "report.js"


def report(
    table: xarray.Dataset,
    audit: Mapping[str, Any],
    folder: Path,
    index: Mapping[str, Any],
    bulk: xarray.Dataset | None = None,
) -> str:
    """Render the report; equal input gives the same page, byte for byte.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    audit : mapping
        What `audit_table` returned for it.
    folder : Path
        Folder of the figures.
    index : mapping
        Their index, as `read_index` returns it.
    bulk : xarray.Dataset, optional
        Bulk properties of the campaign's populations.

    Returns
    -------
    str
        HTML.

    Raises
    ------
    OSError
        If a figure can't be read.
    """
    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    text = (files("scatterloom.figures") / TEMPLATE).read_text(encoding="utf-8")
    populations: list[dict[str, Any]] = []
    if bulk is not None:
        columns = {str(name): bulk[name].values for name in bulk.variables}
        populations = _by_population(bulk_rows(columns))
    return environment.from_string(text).render(
        title=str(table.attrs.get("title", "")),
        campaign=str(table.attrs.get("campaign", "")),
        audit=audit,
        contents=_contents(table),
        effort=effort_rows(table),
        failures=failures(table),
        figures=[_figure(folder, entry) for entry in index["figures"]],
        notes=index["notes"],
        populations=populations,
        provenance=_provenance(table),
        view=embedded(view_data(table, bulk)),
        script=(files("scatterloom.figures") / SCRIPT).read_text(encoding="utf-8"),
        citation=_citation(table),
        config=str(table.attrs.get("config", "")),
    )


def _by_population(rows: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Rows of one population together, with the labels of what is known of it."""
    groups = []
    for name in dict.fromkeys(row["population"] for row in rows):
        own = [row for row in rows if row["population"] == name]
        known = [label for _, label in SHOWN if any(row["values"][label] != NOTHING for row in own)]
        groups.append({"name": name, "rows": own, "labels": known})
    return groups


def effort_rows(table: xarray.Dataset) -> list[dict[str, Any]]:
    """What the solved cases of each particle cost, every distinct case counted once.

    Parameters
    ----------
    table : xarray.Dataset

    Returns
    -------
    list of dict
        particle, cases, median and median_cold (products per wave as solved and from
        zero), warm (cases that took less than half the estimate from zero), saved (share
        of all products, weighted by waves).
    """
    out = []
    for p in range(table.sizes["particle"]):
        part = table.isel(particle=p)
        solved = has_result(part["status"].values)
        names = ("size_parameter", "products", "cold_products_estimate", "wave_count")
        # Equal cases at two wavelengths were solved once.
        cases = np.unique(np.stack([part[n].values[solved] for n in names], axis=1), axis=0)
        products, cold = cases[:, 1], cases[:, 2]
        total, total_cold = float(products @ cases[:, 3]), float(cold @ cases[:, 3])
        out.append(
            {
                "particle": str(part["particle"].values),
                "cases": int(cases.shape[0]),
                "median": float(np.median(products)) if cases.size else None,
                "median_cold": float(np.median(cold)) if cases.size else None,
                "warm": int((products < 0.5 * cold).sum()),
                "saved": 1.0 - total / total_cold if total_cold > 0 else None,
            }
        )
    return out


def _contents(table: xarray.Dataset) -> list[dict[str, str]]:
    out = []
    wavelength = table["wavelength"].values
    for p, w in np.ndindex(table.sizes["particle"], table.sizes["wavelength"]):
        part = table.isel(particle=p, wavelength=w)
        x, radius = part["size_parameter"].values, part["radius_um"].values
        n, k = float(part["refractive_index_n"]), float(part["refractive_index_k"])
        status = part["status"].values
        out.append(
            {
                "particle": str(part["particle"].values),
                "wavelength": f"{float(wavelength[w]):g}",
                "index": f"{n:.4g} + {k:.3g}i" if k else f"{n:.4g}",
                "radius": f"{radius.min():.3g} to {radius.max():.3g}",
                "size_parameter": f"{x.min():.3g} to {x.max():.3g}",
                "sizes": str(x.size),
                "solved": str(int((status == SOLVED).sum())),
                "warned": str(int((status == SOLVED_WITH_WARNING).sum())),
                "other": str(int((~has_result(status)).sum())),
            }
        )
    return out


def _figure(folder: Path, entry: Mapping[str, str]) -> dict[str, Any]:
    svg = (folder / entry["svg"]).read_bytes()
    text = (folder / entry["csv"]).read_text(encoding="utf-8")
    header, *rows = list(csv.reader(io.StringIO(text)))
    source = "data:image/svg+xml;base64," + base64.b64encode(svg).decode()
    return {**entry, "source": source, "header": header, "rows": rows}


def _citation(table: xarray.Dataset) -> str:
    """A reference to the table itself, as far as its attributes go."""
    attributes = {name: str(value) for name, value in table.attrs.items()}
    who = attributes.get("creator_name") or attributes.get("institution") or "Unnamed creator"
    year = attributes.get("date_created", "")[:4] or "no date"
    version = attributes.get("version_scatterloom", "")
    digest = attributes.get("content_digest", "")[:16]
    return (
        f"{who} ({year}): {attributes.get('title', '')}. Scattering table "
        f"{attributes.get('campaign', '')}, computed with Scatterloom {version}, "
        f"content digest {digest}."
    )


def _provenance(table: xarray.Dataset) -> list[tuple[str, str]]:
    attributes = table.attrs
    out = [
        (words, str(attributes[name]))
        for name, words in (
            ("creator_name", "creator"),
            ("license", "licence of the table"),
            ("date_created", "table written"),
            ("content_digest", "content digest of the table (SHA-256)"),
            ("numerics_revision", "numerics revision"),
            ("source", "method"),
            ("time_factor", "time factor"),
            ("sign_convention", "signs"),
            ("normalization", "normalization"),
            ("efficiency_reference", "efficiencies refer to"),
            ("error_statement", "error bars"),
        )
        if name in attributes
    ]
    versions = sorted(name for name in attributes if str(name).startswith("version_"))
    listed = ", ".join(f"{str(n).removeprefix('version_')} {attributes[n]}" for n in versions)
    return [*out, ("versions", listed)]
