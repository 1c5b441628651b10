"""Sheets of particles: surface, cut through the finest lattice, and what they are made of."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.patches import Patch

from scatterloom.figures.picture import Picture
from scatterloom.figures.surface import draw_solid
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solids import placing
from scatterloom.solids.mesh import MEDIUM, Solid

COLOURS = ["#8fb8de", "#e08a3c", "#3f8f6b", "#b36aa0", "#c9b458", "#555555"]
"""Materials from outside inwards: told apart by lightness as well as by hue."""

A_SHEET = 6


@dataclass(frozen=True)
class Body:
    """A particle to be drawn.

    Attributes
    ----------
    name : str
    spec : mapping
        Canonical shape.
    materials : tuple of str
        Names, from outside inwards.
    cells_across : int
        Cells along the longest side of the finest lattice planned.
    radius_um : tuple of 2 float
        Smallest and largest equal-volume radius.
    """

    name: str
    spec: Mapping[str, Any]
    materials: tuple[str, ...]
    cells_across: int
    radius_um: tuple[float, float]


def sheets(bodies: Sequence[Body]) -> list[Callable[[], Picture]]:
    """Makers of pictures, six particles on each; call them within `picture.style`."""
    parts = [bodies[first : first + A_SHEET] for first in range(0, len(bodies), A_SHEET)]
    return [partial(sheet, part, number + 1, len(parts)) for number, part in enumerate(parts)]


def sheet(bodies: Sequence[Body], number: int = 1, of: int = 1) -> Picture:
    """Draw some particles, one in each row.

    Raises
    ------
    ValueError
        If a body cannot be made.
    """
    figure = Figure(figsize=(7.2, 2.15 * len(bodies)), layout="constrained")
    grid = figure.subplots(len(bodies), 3, squeeze=False, width_ratios=(1.0, 1.0, 1.25))
    rows = []
    for (surface, cut, words), body in zip(grid, bodies, strict=True):
        solid = placing.placed(body.spec)
        cells = lattice(from_spec(body.spec), body.cells_across)
        colours = [COLOURS[m % len(COLOURS)] for m in range(solid.materials)]
        draw_solid(surface, solid, colours, open_half=len(solid.interfaces) > 1)
        _draw_cut(cut, cells, colours)
        rows.append(_facts(body, solid, cells))
        _write(words, body, rows[-1], colours)
    return Picture(
        stem=f"particles-{number}",
        title="Particles" if of == 1 else f"Particles, sheet {number} of {of}",
        caption=(
            "Left: the surface; of bodies with something inside the front is taken away. Middle: "
            "the cells at the centre that the plane of x (to the right) and z (up) cuts, on the "
            "finest lattice that is planned; paler cells are partly filled. Right: cells along "
            "the longest side, equal-volume radii of the campaign, radius of the sphere with the "
            "same outer surface, and materials from outside inwards with their part of the "
            "volume."
        ),
        alt="Surfaces and lattice cuts of " + ", ".join(body.name for body in bodies),
        figure=figure,
        header=(
            "particle", "kind", "cells across", "cells", "surface-equivalent over volume-"
            "equivalent radius", "circumscribed over volume-equivalent radius", "materials",
            "volume fractions",
        ),
        rows=[
            (
                body.name, str(body.spec["kind"]), body.cells_across, int(fact.cells),
                fact.surface_radius, fact.reach, " ".join(body.materials),
                " ".join(f"{part:.4g}" for part in fact.shares),
            )
            for body, fact in zip(bodies, rows, strict=True)
        ],
    )  # fmt: skip


@dataclass(frozen=True)
class _Facts:
    cells: int
    surface_radius: float
    reach: float
    shares: tuple[float, ...]
    planes: int


def _facts(body: Body, solid: Solid, cells: Lattice) -> _Facts:
    area = math.fsum(face.mesh.area for face in solid.interfaces if face.outside == MEDIUM)
    held = cells.fraction.sum(axis=1)
    return _Facts(
        len(cells.cell),
        math.sqrt(area / (4.0 * math.pi)),
        placing.circumscribed_radius(solid),
        tuple(float(part) for part in held / held.sum()),
        sum(placing.is_mirrored(solid, axis) for axis in np.eye(3)),
    )


def _draw_cut(axes: Axes, cells: Lattice, colours: Sequence[str]) -> None:
    """The layer of cells at the middle of y, seen along y."""
    nx, ny, nz = cells.box
    layer = cells.cell[:, 1] == ny // 2
    rgb = np.ones((nz, nx, 3))
    for part, colour in zip(cells.fraction[:, layer], colours, strict=True):
        where = cells.cell[layer, 2], cells.cell[layer, 0]
        rgb[where] -= part[:, None] * (1.0 - np.array(to_rgb(colour)))
    axes.imshow(np.clip(rgb, 0.0, 1.0), origin="lower", interpolation="nearest",
                extent=(0, nx, 0, nz))  # fmt: skip
    if max(nx, nz) <= 64:
        axes.set_xticks(range(nx + 1), minor=True)
        axes.set_yticks(range(nz + 1), minor=True)
        axes.grid(which="minor", color="#00000030", linewidth=0.25)
    axes.set_xticks([])
    axes.set_yticks([])
    axes.tick_params(which="minor", length=0)
    axes.spines[:].set_visible(False)


def _write(axes: Axes, body: Body, facts: _Facts, colours: Sequence[str]) -> None:
    axes.axis("off")
    low, high = body.radius_um
    size = f"{low:.3g}" if low == high else f"{low:.3g} to {high:.3g}"
    lines = [
        str(body.spec["kind"]).replace("_", " "),
        f"{body.cells_across} cells across, {facts.cells} in all",
        f"equal-volume radius {size} µm",
        f"equal-surface radius {facts.surface_radius:.3f} times that",
        f"mirror planes across x, y, z: {facts.planes}",
    ]
    axes.text(0.0, 1.0, body.name, transform=axes.transAxes, va="top", weight="bold")
    axes.text(0.0, 0.86, "\n".join(lines), transform=axes.transAxes, va="top", fontsize="small",
              linespacing=1.35)  # fmt: skip
    key = [
        Patch(facecolor=colour, edgecolor="#222222", label=f"{name} ({100 * part:.3g} %)")
        for name, part, colour in zip(body.materials, facts.shares, colours, strict=True)
    ]
    axes.legend(handles=key, loc="lower left", bbox_to_anchor=(-0.02, -0.04), frameon=False,
                fontsize="small", handlelength=1.2, labelspacing=0.3, borderpad=0.0,
                ncols=1 if len(key) < 3 else 2)  # fmt: skip
