"""Bulk properties of a population: its sizes, and its matrix against scattering angle."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from scatterloom.bulk.population import Population
from scatterloom.figures.axes import ANGLE_LABEL, angle_axis, plain_log_ticks, ratio_axis
from scatterloom.figures.curves import LABELS, draw_band, series_legend
from scatterloom.figures.picture import BAND, Picture
from scatterloom.figures.selection import thinned
from scatterloom.scattering.elements import RATIOS

if TYPE_CHECKING:
    import xarray

WAVELENGTHS_SHOWN = 4


def population_panel(
    bulk: xarray.Dataset,
    position: int,
    population: Population,
    radius_range_um: tuple[float, float],
) -> Picture:
    """Size distribution, F11, -F12/F11 and F22/F11 of one population.

    Parameters
    ----------
    bulk : xarray.Dataset
        Opened bulk properties.
    position : int
        Of the population in `bulk`.
    population : Population
        The same, with its size distribution.
    radius_range_um : (float, float)
        Smallest and largest radius of the table [um].

    Returns
    -------
    Picture

    Raises
    ------
    ValueError
        If the average failed at every wavelength.
    """
    part = bulk.isel(population=position).load()
    known = np.flatnonzero(np.isfinite(part["extinction_cross_section"].values))
    if known.size == 0:
        raise ValueError(f"no average of population {population.name}")
    shown = known[np.unique(np.linspace(0, known.size - 1, WAVELENGTHS_SHOWN).astype(int))]
    figure = Figure(figsize=(3.4, 3.6))
    sizes, bright, polarized, cross = figure.subplots(2, 2).ravel()
    _draw_sizes(sizes, population, radius_range_um)
    bright.set_yscale("log")
    bright.set_title("$F_{11}$, mean 1")
    angles = np.asarray(part["angle"].values, dtype=np.float64)
    panels = {"minus_f12_f11": polarized, "f22_f11": cross}
    rows: list[list[float]] = []
    for series, w in enumerate(shown):
        f = part["scattering_matrix"].values[w]
        h = part["scattering_matrix_error"].values[w]
        r = part["scattering_matrix_ratio"].values[w]
        r_error = part["scattering_matrix_ratio_error"].values[w]
        draw_band(bright, angles, f[:, 0, 0], h[:, 0, 0], series)
        columns = [f[:, 0, 0], h[:, 0, 0]]
        for which in RATIOS:
            value = which.sign * r[:, which.row, which.col]
            bound = r_error[:, which.row, which.col]
            columns += [value, bound]
            if which.name in panels:
                draw_band(panels[which.name], angles, value, bound, series)
                panels[which.name].set_title(LABELS[which.name])
                ratio_axis(panels[which.name])
        wavelength = float(part["wavelength"].values[w])
        rows += [[wavelength, angles[i], *(c[i] for c in columns)] for i in thinned(angles)]
    polarized.axhline(0.0, color="#555555", linewidth=0.6, zorder=1)
    for axes in (bright, polarized, cross):
        angle_axis(axes, angles)
        axes.set_xlabel(ANGLE_LABEL)
    labels = [f"{part['wavelength'].values[w]:g} µm" for w in shown]
    series_legend(figure, bright, labels)

    header = ["wavelength (µm)", "angle (deg)", "F11", "F11 half width"]
    for which in RATIOS:
        header += [which.label, f"{which.label} half width"]
    mixture = ", ".join(
        f"{share:.3g} {name}"
        for name, share in zip(part["particle"].values, part["number_fraction"].values, strict=True)
        if share > 0
    )
    outside = part["extinction_share_below"].values + part["extinction_share_above"].values
    return Picture(
        stem=f"population-{population.name}",
        title=f"Population: {population.name}",
        caption=(
            f"Population {population.name} ({mixture} by number; effective radius "
            f"{population.effective_radius_um:.3g} µm, effective variance "
            f"{population.effective_variance:.3g}). First panel: its particles by number and by "
            f"geometric cross section; shaded: sizes of the table, outside of which lies an "
            f"estimated {100 * float(np.nanmax(outside)):.2g} % of the extinction. {BAND} They add "
            "the table's errors as fully correlated over sizes, the quadrature error and the "
            "effect of sizes outside the table."
        ),
        alt=_in_words(part, shown, population.name),
        figure=figure,
        header=header,
        rows=rows,
    )


def _draw_sizes(axes: Axes, population: Population, radius_range_um: tuple[float, float]) -> None:
    spans = [population.distribution_of(name).span_um for name in population.numbers]
    low = min(*(span[0] for span in spans), radius_range_um[0])
    high = max(*(span[1] for span in spans), radius_range_um[1])
    # Beyond three decades a wide distribution would squeeze the table into a corner.
    low = max(low, high / 1e4)
    radius = np.geomspace(low, high, 301)
    axes.axvspan(*radius_range_um, color="#e4e4e4", linewidth=0, zorder=0)
    shares = population.number_fractions().items()
    parts = [share * population.distribution_of(name).density(radius) for name, share in shares]
    number = np.sum(parts, axis=0)
    area = number * radius**2
    for values, text, grey, line in (
        (number, "number", "#222222", "-"),
        (area, "area", "#777777", "--"),
    ):
        axes.plot(radius, values / values.max(), color=grey, linestyle=line, label=text)
    axes.set_xscale("log")
    plain_log_ticks(axes.xaxis, float(radius[0]), float(radius[-1]))
    axes.set_ylim(0.0, 1.35)
    axes.set_title("sizes (peak 1)")
    axes.set_xlabel("radius (µm)")
    axes.legend(loc="upper center", ncols=2, handlelength=1.8, columnspacing=0.8)


def _in_words(part: xarray.Dataset, shown: np.ndarray, name: str) -> str:
    texts = []
    for w in shown:
        texts.append(
            f"at {part['wavelength'].values[w]:g} micrometres the single-scattering albedo is "
            f"{part['single_scattering_albedo'].values[w]:.4f} and the asymmetry parameter "
            f"{part['asymmetry_parameter'].values[w]:.3f}"
        )
    return (
        f"Four panels for population {name}: its size distribution, and F11, -F12/F11 and F22/F11 "
        f"against scattering angle; {'; '.join(texts)}."
    )
