"""Several populations in one picture: matrix panel, polar intensity, lidar quantities."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter

from scatterloom.figures.axes import ANGLE_LABEL, angle_axis, plain_log_ticks, ratio_axis
from scatterloom.figures.curves import LABELS, draw_band, series_legend
from scatterloom.figures.picture import BAND, SERIES, Picture
from scatterloom.figures.selection import thinned
from scatterloom.scattering.elements import RATIOS

if TYPE_CHECKING:
    import xarray

MOST_POPULATIONS = len(SERIES)
_ASIDE = ((8, 6), (8, -6), (-8, 6), (-8, -6), (0, 10))
"""Where labels stand beside their points, apart for every series [points]."""


def _known(bulk: xarray.Dataset, wavelength: int) -> list[int]:
    """Populations with an average, as many as can be told apart."""
    ext = bulk["extinction_cross_section"].values[:, wavelength]
    return [int(i) for i in np.flatnonzero(np.isfinite(ext))[:MOST_POPULATIONS]]


def _names(bulk: xarray.Dataset, positions: list[int]) -> list[str]:
    return [str(bulk["population"].values[i]) for i in positions]


def _left_out(bulk: xarray.Dataset) -> str:
    count = bulk.sizes["population"]
    return f" The first {MOST_POPULATIONS} of {count}." if count > MOST_POPULATIONS else ""


def populations_matrix(bulk: xarray.Dataset, wavelength: int) -> Picture:
    """F11 and the five ratios of all populations at one wavelength.

    Raises
    ------
    ValueError
        If fewer than two populations have an average there.
    """
    shown = _known(bulk, wavelength)
    at = float(bulk["wavelength"].values[wavelength])
    if len(shown) < 2:
        raise ValueError(f"fewer than two populations have an average at {at:g} um")
    part = bulk.isel(wavelength=wavelength)
    angles = np.asarray(part["angle"].values, dtype=np.float64)
    figure = Figure(figsize=(3.4, 4.6))
    panels = figure.subplots(3, 2, sharex=True).ravel()
    panels[0].set_yscale("log")
    panels[0].set_title("$F_{11}$, mean 1")
    rows: list[list[object]] = []
    for series, i in enumerate(shown):
        f = part["scattering_matrix"].values[i, :, 0, 0]
        h = part["scattering_matrix_error"].values[i, :, 0, 0]
        r = part["scattering_matrix_ratio"].values[i]
        e = part["scattering_matrix_ratio_error"].values[i]
        draw_band(panels[0], angles, f, h, series)
        columns = [f, h]
        for panel, which in zip(panels[1:], RATIOS, strict=True):
            value, bound = which.sign * r[:, which.row, which.col], e[:, which.row, which.col]
            draw_band(panel, angles, value, bound, series)
            columns += [value, bound]
        name = _names(bulk, [i])[0]
        rows += [[name, angles[k], *(c[k] for c in columns)] for k in thinned(angles)]
    for panel, which in zip(panels[1:], RATIOS, strict=True):
        panel.set_title(LABELS[which.name])
        ratio_axis(panel)
        if which.signed:
            panel.axhline(0.0, color="#555555", linewidth=0.6, zorder=1)
    plain_log_ticks(panels[0].yaxis, *panels[0].get_ylim())
    angle_axis(panels[0], angles)
    for panel in panels[-2:]:
        panel.set_xlabel(ANGLE_LABEL)
    names = _names(bulk, shown)
    series_legend(figure, panels[0], names)
    header = ["population", "angle (deg)", "F11", "F11 half width"]
    for which in RATIOS:
        header += [which.label, f"{which.label} half width"]
    return Picture(
        stem=f"populations-{at:g}um",
        title=f"Populations at {at:g} µm",
        caption=f"Scattering matrices of the populations {', '.join(names)} at {at:g} µm. {BAND}"
        + _left_out(bulk),
        alt=(
            f"Six panels of curves against scattering angle, one curve for each of "
            f"{', '.join(names)}: F11 and the ratios F22, F33, F44, -F12 and F34 to F11."
        ),
        figure=figure,
        header=header,
        rows=rows,
    )


def polar_intensity(bulk: xarray.Dataset, wavelength: int) -> Picture:
    """Logarithm of F11 as radius over the direction of scattering, light from the left.

    Raises
    ------
    ValueError
        If no population has an average there.
    """
    shown = _known(bulk, wavelength)
    at = float(bulk["wavelength"].values[wavelength])
    if not shown:
        raise ValueError(f"no population has an average at {at:g} um")
    part = bulk.isel(wavelength=wavelength)
    angles = np.asarray(part["angle"].values, dtype=np.float64)
    f11 = part["scattering_matrix"].values[:, :, 0, 0]
    logs = np.log10(f11[shown])
    low, high = float(logs.min()) - 0.4, float(logs.max()) + 0.1
    figure = Figure(figsize=(3.4, 3.3))
    axes: Any = figure.add_subplot(projection="polar")
    for series, i in enumerate(shown):
        colour, line, marker = SERIES[series]
        theta = np.deg2rad(np.concatenate([-angles[::-1], angles]))
        radius = np.log10(np.concatenate([f11[i][::-1], f11[i]])) - low
        every = max(1, theta.size // 12)
        axes.plot(
            theta,
            radius,
            color=colour,
            linestyle=line,
            marker=marker,
            markevery=((series * every) // 5, every),
            markerfacecolor="white",
            markeredgewidth=0.8,
        )
    axes.set_ylim(0.0, high - low)
    decades = range(math.ceil(low), math.floor(high) + 1)
    axes.set_yticks([d - low for d in decades], [f"$10^{{{d}}}$" for d in decades])
    axes.set_rlabel_position(112.0)
    axes.set_thetagrids(np.arange(0, 360, 30))
    axes.xaxis.set_major_formatter(
        FuncFormatter(lambda t, _: f"{abs((np.degrees(t) + 180.0) % 360.0 - 180.0):.0f}°")
    )
    names = _names(bulk, shown)
    series_legend(figure, axes, names)
    rows: list[list[object]] = [
        [name, angles[k], f11[i, k]]
        for name, i in zip(names, shown, strict=True)
        for k in thinned(angles)
    ]
    return Picture(
        stem=f"polar-{at:g}um",
        title=f"Intensity around the particles at {at:g} µm",
        caption=(
            f"F11 (mean 1) on a logarithmic radius over the direction of scattering at {at:g} µm, "
            f"for {', '.join(names)}; 0° is forward. Both halves are the same." + _left_out(bulk)
        ),
        alt=(
            f"Polar diagram of F11 for {', '.join(names)}; it is largest forward, "
            f"{f11[shown].max():.3g}, and least {f11[shown].min():.3g}."
        ),
        figure=figure,
        header=["population", "angle (deg)", "F11"],
        rows=rows,
    )


def lidar_scatter(bulk: xarray.Dataset) -> Picture:
    """Linear depolarization against lidar ratio, one point per population and wavelength.

    Raises
    ------
    ValueError
        If nothing is known at 180 degrees.
    """
    x = {k: bulk[f"lidar_ratio{k}"].values for k in ("", "_error")}
    y = {k: bulk[f"linear_depolarization_ratio{k}"].values for k in ("", "_error")}
    known = np.isfinite(x[""]) & np.isfinite(y[""])
    known[MOST_POPULATIONS:] = False
    if not known.any():
        raise ValueError("no lidar ratio: the angles do not end at 180 degrees")
    waves = bulk["wavelength"].values
    figure = Figure(figsize=(3.4, 2.9))
    axes = figure.subplots()
    names = _names(bulk, [int(i) for i in np.flatnonzero(known.any(axis=1))])
    rows: list[list[object]] = []
    for series, i in enumerate(np.flatnonzero(known.any(axis=1))):
        colour, line, marker = SERIES[series]
        at = np.flatnonzero(known[i])
        axes.plot(x[""][i, at], y[""][i, at], color=colour, linestyle=line, linewidth=0.6)
        axes.errorbar(
            x[""][i, at],
            y[""][i, at],
            xerr=x["_error"][i, at],
            yerr=y["_error"][i, at],
            fmt=marker,
            color=colour,
            markerfacecolor="white",
            markersize=4.0,
            elinewidth=0.8,
            capsize=1.5,
        )
        for w in at:
            axes.annotate(
                f"{waves[w]:g}",
                (x[""][i, w], y[""][i, w]),
                xytext=_ASIDE[series],
                textcoords="offset points",
                ha="center",
                va="center",
                fontsize=5.5,
                color=colour,
            )
            cells = (x[""][i, w], x["_error"][i, w], y[""][i, w], y["_error"][i, w])
            rows.append([names[series], waves[w], *cells])
    axes.set_xlabel("lidar ratio (sr)")
    axes.set_ylabel("linear depolarization ratio")
    axes.margins(0.12)
    if axes.get_ylim()[1] - axes.get_ylim()[0] < 0.02:
        middle = float(np.mean(axes.get_ylim()))
        axes.set_ylim(middle - 0.01, middle + 0.01)
    handles = [
        axes.plot([], [], color=c, linestyle=line, marker=m, markerfacecolor="white")[0]
        for c, line, m in SERIES[: len(names)]
    ]
    figure.legend(handles, names, loc="outside lower center", ncols=min(3, len(names)))
    return Picture(
        stem="lidar",
        title="Lidar ratio and depolarization",
        caption=(
            "Linear depolarization ratio against lidar ratio of each population; numbers are "
            "wavelengths in µm, lines join those of one population. Bars are 95 % half widths."
            + _left_out(bulk)
        ),
        alt=(
            f"Points of depolarization against lidar ratio for {', '.join(names)}; lidar ratios "
            f"lie between {x[''][known].min():.3g} and {x[''][known].max():.3g} sr, depolarization "
            f"between {y[''][known].min():.2g} and {y[''][known].max():.2g}."
        ),
        figure=figure,
        header=[
            *("population", "wavelength (µm)", "lidar ratio (sr)", "half width"),
            *("linear depolarization", "half width"),
        ],
        rows=rows,
    )
