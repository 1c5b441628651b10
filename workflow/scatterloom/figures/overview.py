"""The whole campaign at a glance: sizes against wavelengths, and where bars are wide."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LogNorm
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, NullFormatter, NullLocator

from scatterloom.figures.axes import plain_log_ticks
from scatterloom.figures.maps import edges
from scatterloom.figures.picture import Picture
from scatterloom.figures.selection import FloatArray
from scatterloom.scattering.error_bars import over_angle
from scatterloom.scattering.record import FAILED, MISSING, SOLVED_WITH_WARNING, has_result

if TYPE_CHECKING:
    import xarray

FEWEST_WAVELENGTHS = 3
MOST_LADDERS = 40
_GAP = "#b0b0b0"
_MAPS = (
    ("extinction_efficiency", "extinction efficiency", "cividis"),
    ("single_scattering_albedo", "single-scattering albedo", "viridis"),
    ("asymmetry_parameter", "asymmetry parameter", "magma"),
)


def size_wavelength_map(table: xarray.Dataset, particle: int) -> Picture:
    """Extinction efficiency, albedo and asymmetry over radius and wavelength.

    Raises
    ------
    ValueError
        If there are fewer than `FEWEST_WAVELENGTHS`, or nothing is solved.
    """
    part = table.isel(particle=particle)
    name = str(part["particle"].values)
    waves = np.asarray(part["wavelength"].values, dtype=np.float64)
    solved = has_result(part["status"].values)
    if waves.size < FEWEST_WAVELENGTHS or not solved.any():
        raise ValueError(f"a map over wavelength needs {FEWEST_WAVELENGTHS} of them: {name}")
    radius = np.asarray(part["radius_um"].values, dtype=np.float64)
    if not np.allclose(radius, radius[0]):
        raise ValueError(f"a map over radius needs the same radii at every wavelength: {name}")
    figure = Figure(figsize=(3.4, 5.4))
    panels = figure.subplots(3, 1, sharex=True)
    values = {key: np.where(solved, part[key].values, np.nan) for key, _, _ in _MAPS}
    for axes, (key, words, colours) in zip(panels, _MAPS, strict=True):
        axes.set_facecolor(_GAP)
        axes.grid(False)
        mesh = axes.pcolormesh(
            np.exp(edges(np.log(waves))),
            np.exp(edges(np.log(radius[0]))),
            np.ma.masked_invalid(values[key].T),
            cmap=colours,
            rasterized=True,
        )
        axes.set_xscale("log")
        axes.set_yscale("log")
        plain_log_ticks(axes.yaxis, float(radius[0, 0]), float(radius[0, -1]))
        axes.set_ylabel("radius (µm)")
        axes.set_title(words)
        bar = figure.colorbar(mesh, ax=axes, pad=0.02, aspect=14)
        bar.outline.set_linewidth(0.5)
    plain_log_ticks(panels[-1].xaxis, float(waves[0]), float(waves[-1]))
    panels[-1].set_xlabel("wavelength (µm)")
    ends = {key: (float(np.nanmin(v)), float(np.nanmax(v))) for key, v in values.items()}
    rows = [
        [waves[w], radius[w, s], *(values[key][w, s] for key, _, _ in _MAPS)]
        for w in range(waves.size)
        for s in np.unique(np.linspace(0, radius.shape[1] - 1, 8).astype(int))
    ]
    listed = "; ".join(
        f"{words} {ends[key][0]:.3g} to {ends[key][1]:.3g}" for key, words, _ in _MAPS
    )
    return Picture(
        stem=f"spectrum-{name}",
        title=f"Size and wavelength: {name}",
        caption=(
            f"Extinction efficiency, single-scattering albedo and asymmetry parameter of {name} "
            "over wavelength and the radius of the equal-volume sphere. Grey: not solved."
        ),
        alt=f"Three maps over wavelength and radius for {name}: {listed}.",
        figure=figure,
        header=["wavelength (µm)", "radius (µm)", *(words for _, words, _ in _MAPS)],
        rows=rows,
    )


def audit_map(table: xarray.Dataset, asked: tuple[float, float] | None) -> Picture:
    """Where in the campaign the half widths are wide.

    Parameters
    ----------
    table : xarray.Dataset
    asked : (float, float) or None
        Half widths asked for, of F11 (relative) and of ratios.

    Raises
    ------
    ValueError
        If nothing is solved.
    """
    status = np.asarray(table["status"].values)
    pairs = list(np.ndindex(*status.shape[:2]))[:MOST_LADDERS]
    if not has_result(status).any():
        raise ValueError("no case is solved, so there are no half widths to map")
    angles = np.asarray(table["angle"].values, dtype=np.float64)
    rows_f11, rows_ratio = [], []
    for p, w in pairs:
        width = table["scattering_matrix_ratio_error"].isel(particle=p, wavelength=w).values
        f11, ratio = over_angle(width.astype(np.float64), angles)
        good = has_result(status[p, w])
        rows_f11.append(np.where(good, 100.0 * f11, np.nan))
        rows_ratio.append(np.where(good, ratio, np.nan))
    labels = [
        f"{table['particle'].values[p]}, {float(table['wavelength'].values[w]):g}" for p, w in pairs
    ]
    figure = Figure(figsize=(3.4, min(7.5, 1.5 + 0.36 * len(pairs))))
    panels = figure.subplots(2, 1, sharex=True)
    limits = (None, None) if asked is None else (100.0 * asked[0], asked[1])
    for axes, values, limit, words in (
        (panels[0], np.array(rows_f11), limits[0], "half width of F$_{11}$ (%)"),
        (panels[1], np.array(rows_ratio), limits[1], "widest half width of a ratio"),
    ):
        _draw(figure, axes, values, status, pairs, limit)
        axes.set_title(words)
        axes.set_yticks(np.arange(len(pairs)), labels, fontsize=5.5 if len(pairs) > 8 else 6.5)
    panels[-1].set_xlabel("position in the list of sizes")
    beyond = 0
    if limits[0] is not None and limits[1] is not None:
        wide = (np.array(rows_f11) > limits[0]) | (np.array(rows_ratio) > limits[1])
        beyond = int(wide.sum())
    said = (
        ""
        if asked is None
        else f" Dots: wider than asked ({limits[0]:.3g} % and {limits[1]:.3g}), {beyond} cells."
    )
    more = status.shape[0] * status.shape[1] - len(pairs)
    rows = [
        [label, s, rows_f11[k][s], rows_ratio[k][s]]
        for k, label in enumerate(labels)
        for s in np.unique(np.linspace(0, status.shape[2] - 1, 10).astype(int))
    ]
    finite = np.array(rows_f11)[np.isfinite(rows_f11)]
    return Picture(
        stem="audit-map",
        title="Where the error bars are wide",
        caption=(
            "95 % half widths, root mean square over angle, of every particle and wavelength (µm) "
            "over the list of sizes: of F11 in percent, and of the ratio to F11 that is widest."
            f"{said} Crosses: failed or missing; triangles: solved with a warning."
            + (f" {more} more rows are not drawn." if more else "")
        ),
        alt=(
            f"Two maps of half widths with {len(pairs)} rows; those of F11 lie between "
            f"{finite.min():.2g} and {finite.max():.2g} percent, and {beyond} cells are wider than "
            "asked."
        ),
        figure=figure,
        header=["particle, wavelength (µm)", "size", "F11 half width (%)", "widest of the ratios"],
        rows=rows,
    )


def _draw(
    figure: Figure,
    axes: Axes,
    values: FloatArray,
    status: np.ndarray,
    pairs: list[tuple[int, ...]],
    limit: float | None,
) -> None:
    axes.set_facecolor(_GAP)
    axes.grid(False)
    known = values[np.isfinite(values) & (values > 0.0)]
    low, high = (known.min(), known.max()) if known.size else (0.1, 1.0)
    if high < 1.2 * low:
        low, high = low / 1.2, high * 1.2
    mesh = axes.pcolormesh(
        np.arange(values.shape[1] + 1) - 0.5,
        np.arange(values.shape[0] + 1) - 0.5,
        np.ma.masked_invalid(values),
        cmap="cividis",
        norm=LogNorm(low, high),
        rasterized=True,
    )
    axes.invert_yaxis()
    marks = [
        (np.isin([status[pair] for pair in pairs], (FAILED, MISSING)), "x", "black"),
        (np.array([status[pair] for pair in pairs]) == SOLVED_WITH_WARNING, "^", "white"),
    ]
    if limit is not None:
        marks.append((values > limit, ".", "#c04a00"))
    for where, marker, colour in marks:
        y, x = np.nonzero(where)
        axes.plot(x, y, linestyle="none", marker=marker, color=colour, markersize=2.6)
    bar = figure.colorbar(mesh, ax=axes, pad=0.02, aspect=14)
    bar.outline.set_linewidth(0.5)
    plain_log_ticks(bar.ax.yaxis, float(low), float(high))
    bar.ax.yaxis.set_minor_locator(NullLocator())
    bar.ax.yaxis.set_minor_formatter(NullFormatter())
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.0f}"))
