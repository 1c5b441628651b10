"""All figures of a campaign, in order of presentation, with their index."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from scatterloom.bulk.population import Population
from scatterloom.figures.curves import matrix_curves
from scatterloom.figures.effort import product_counts
from scatterloom.figures.maps import size_angle_map
from scatterloom.figures.oriented import direction_map
from scatterloom.figures.overlay import lidar_scatter, polar_intensity, populations_matrix
from scatterloom.figures.overview import FEWEST_WAVELENGTHS, audit_map, size_wavelength_map
from scatterloom.figures.picture import ENDINGS, INDEX, Picture, save, style, write_index
from scatterloom.figures.population import population_panel
from scatterloom.figures.selection import load_ladder

if TYPE_CHECKING:
    import xarray

WAVELENGTHS_SHOWN = 3
LADDERS_SHOWN = 12
"""Pairs of particle and wavelength that are drawn; a report with more would not be read."""

MAPS_SHOWN = 3
"""Particles of which a map of directions is drawn for each distribution of orientation."""


def make_figures(
    table: xarray.Dataset,
    folder: Path,
    bulk: xarray.Dataset | None = None,
    populations: Sequence[Population] = (),
    oriented: Mapping[str, xarray.Dataset] | None = None,
) -> tuple[list[dict[str, str]], list[str]]:
    """Draw every figure and write the index last.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    folder : Path
        Where PNG, SVG, PDF, CSV and `figures.json` go. The index is taken away first, so
        that it never names figures of two tables; figures it no longer names are removed.
    bulk : xarray.Dataset, optional
        Bulk properties of the table.
    populations : sequence of Population
        The populations of `bulk`, in its order.
    oriented : mapping of str to xarray.Dataset
        Tables of oriented particles by the name of their distribution.

    Returns
    -------
    entries : list of dict
        As in the index: name, png, svg, pdf, csv, title, caption, alt.
    notes : list of str
        What was not drawn, and why.

    Raises
    ------
    OSError
        From the file system.
    """
    folder.mkdir(parents=True, exist_ok=True)
    (folder / INDEX).unlink(missing_ok=True)
    entries: list[dict[str, str]] = []
    notes: list[str] = []
    with style():
        maps: list[Callable[[], Picture]] = [
            partial(direction_map, content, name, particle, 0)
            for name, content in (oriented or {}).items()
            for particle in range(min(content.sizes["particle"], MAPS_SHOWN))
        ]
        for draw in (*_plans(table, bulk, populations, notes), *maps):
            try:
                picture = draw()
            except ValueError as reason:
                notes.append(f"not drawn: {reason}")
                continue
            entries.append(save(picture, folder))
    # Figures of an earlier campaign file would be taken for figures of this table.
    named = {entry[ending] for entry in entries for ending in ENDINGS}
    for ending in ENDINGS:
        for path in folder.glob(f"*.{ending}"):
            if path.name not in named:
                path.unlink()
    write_index(folder, entries, notes, str(table.attrs.get("content_digest", "")))
    return entries, notes


def _asked(table: xarray.Dataset) -> tuple[float, float] | None:
    """Half widths that the campaign asked for, as its configuration in the table says."""
    from ruamel.yaml import YAML

    config = YAML(typ="safe", pure=True).load(str(table.attrs.get("config", ""))) or {}
    accuracy = config.get("accuracy") or {}
    if {"f11_relative", "ratio_absolute"} <= set(accuracy):
        return float(accuracy["f11_relative"]), float(accuracy["ratio_absolute"])
    return None


def _plans(
    table: xarray.Dataset,
    bulk: xarray.Dataset | None,
    populations: Sequence[Population],
    notes: list[str],
) -> Iterator[Callable[[], Picture]]:
    pairs = list(np.ndindex(table.sizes["particle"], table.sizes["wavelength"]))
    if len(pairs) > LADDERS_SHOWN:
        notes.append(
            f"the first {LADDERS_SHOWN} of {len(pairs)} pairs of particle and wavelength are drawn"
        )
    for particle, wavelength in pairs[:LADDERS_SHOWN]:
        ladder = load_ladder(table, particle, wavelength)
        yield partial(matrix_curves, ladder)
        yield partial(size_angle_map, ladder)
    particles = table.sizes["particle"]
    if particles > LADDERS_SHOWN:
        notes.append(f"products are drawn for the first {LADDERS_SHOWN} of {particles} particles")
    if table.sizes["wavelength"] >= FEWEST_WAVELENGTHS:
        for particle in range(min(particles, LADDERS_SHOWN)):
            yield partial(size_wavelength_map, table, particle)
    for particle in range(min(particles, LADDERS_SHOWN)):
        yield partial(product_counts, table, particle)
    yield partial(audit_map, table, _asked(table))
    if bulk is None:
        return
    waves = bulk.sizes["wavelength"]
    if waves > WAVELENGTHS_SHOWN:
        notes.append(f"populations are drawn at {WAVELENGTHS_SHOWN} of {waves} wavelengths")
    for w in np.unique(np.linspace(0, waves - 1, min(waves, WAVELENGTHS_SHOWN)).astype(int)):
        if bulk.sizes["population"] > 1:
            yield partial(populations_matrix, bulk, int(w))
        yield partial(polar_intensity, bulk, int(w))
    if float(bulk["angle"][-1]) == 180.0:
        yield partial(lidar_scatter, bulk)
    if len(populations) > LADDERS_SHOWN:
        notes.append(f"the first {LADDERS_SHOWN} of {len(populations)} populations are drawn")
    radius = table["radius_um"].values
    reach = (float(radius.min()), float(radius.max()))
    for i, population in enumerate(populations[:LADDERS_SHOWN]):
        yield partial(population_panel, bulk, i, population, reach)
