"""A measured scattering matrix beside modelled ones, with the residuals below."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from scatterloom.bulk.compare import Model, Residuals
from scatterloom.bulk.measurement import BRIGHTNESS
from scatterloom.bulk.retrieval import Fit
from scatterloom.bulk.verdict import Verdict
from scatterloom.figures.axes import ANGLE_LABEL, angle_axis, plain_log_ticks, ratio_axis
from scatterloom.figures.curves import draw_band, series_legend
from scatterloom.figures.picture import BAND, SERIES, Picture
from scatterloom.figures.selection import FloatArray
from scatterloom.scattering.elements import RATIOS

MOST_MODELS = 4
_PLACES = {"F11": (0, 0)} | {f"F{r.row + 1}{r.col + 1}/F11": (r.row, r.col) for r in RATIOS}


def measured_panel(
    stem: str,
    wavelength_um: float,
    models: Mapping[str, Callable[[float], Model]],
    residuals: Mapping[str, Sequence[Residuals]],
) -> Picture:
    """Every measured element at one wavelength.

    Parameters
    ----------
    stem : str
        Name of the measurement.
    wavelength_um : float
    models : mapping of str to callable
        Model by name; the first `MOST_MODELS` are drawn.
    residuals : mapping of str to sequence of Residuals
        Of the same models.

    Returns
    -------
    Picture
    """
    names = list(models)[:MOST_MODELS]
    here = {
        name: {r.element: r for r in residuals[name] if r.wavelength_um == wavelength_um}
        for name in names
    }
    elements = [e for e in _PLACES if e in here[names[0]]]
    rows = -(-len(elements) // 2)
    columns = min(2, len(elements))
    figure = Figure(figsize=(3.4, 0.5 + 1.75 * rows))
    grid = figure.add_gridspec(2 * rows, columns, height_ratios=[3.0, 1.1] * rows)
    # F11 of the measurement is on the scale of each model: show it on that of the first.
    angles = models[names[0]](wavelength_um).angle_deg
    upper = None
    table: list[list[object]] = []
    for position, element in enumerate(elements):
        row, column = 2 * (position // columns), position % columns
        upper = figure.add_subplot(grid[row, column])
        lower = figure.add_subplot(grid[row + 1, column], sharex=upper)
        _draw(upper, lower, element, wavelength_um, models, here, names)
        angle_axis(upper, angles)
        upper.tick_params(labelbottom=False)
        if row + 2 >= 2 * rows or position + columns >= len(elements):
            lower.set_xlabel(ANGLE_LABEL)
        if column == 0:
            lower.set_ylabel("pull")
        for name in names:
            r = here[name][element]
            for i in range(r.angle_deg.size):
                values = (r.measured[i], r.measured_sd[i], r.model[i], r.model_sd[i], r.pull[i])
                table.append([name, element, r.angle_deg[i], *values])
    assert upper is not None
    series_legend(figure, upper, names)
    words = {
        name: f"{sum(r.chi_square for r in part.values()):.3g} "
        f"for {sum(r.angle_deg.size for r in part.values())} data"
        for name, part in here.items()
    }
    listed = "; ".join(f"{name} {text}" for name, text in words.items())
    return Picture(
        stem=f"measured-{stem}-{wavelength_um:g}um",
        title=f"Measurement {stem} at {wavelength_um:g} µm",
        caption=(
            f"Measured elements (points, bars of one standard deviation, F11 on the scale of the "
            f"first model) and models (lines). {BAND} Below each: measured less model in standard "
            f"deviations of both; dotted lines at -2 and 2. Chi-square: {listed}."
        ),
        alt=(
            f"{len(elements)} pairs of panels against scattering angle for the measurement {stem}: "
            f"values with models, and residuals. Chi-square: {listed}."
        ),
        figure=figure,
        header=[
            *("model", "element", "angle (deg)", "measured", "standard deviation"),
            *("model value", "standard deviation of model", "pull"),
        ],
        rows=table,
    )


def _draw(
    upper: Axes,
    lower: Axes,
    element: str,
    wavelength_um: float,
    models: Mapping[str, Callable[[float], Model]],
    here: Mapping[str, Mapping[str, Residuals]],
    names: Sequence[str],
) -> None:
    i, j = _PLACES[element]
    sign = -1.0 if element == "F12/F11" else 1.0
    label = f"$F_{{{i + 1}{j + 1}}}$" + ("" if element == BRIGHTNESS else "$/F_{11}$")
    upper.set_title(("$-$" if sign < 0 else "") + label)
    first = here[names[0]][element]
    if element == BRIGHTNESS:
        upper.set_yscale("log")
    for series, name in enumerate(names):
        model = models[name](wavelength_um)
        value, width = model.matrix[:, i, j], model.half_width[:, i, j]
        if element != BRIGHTNESS:
            value, width = value / model.matrix[:, 0, 0], model.ratio_half_width[:, i, j]
        else:
            # Models differ in normalization too: bring them together at the first residual.
            value, width = _together(model, value, width, here[name][element], first)
        draw_band(upper, model.angle_deg, sign * value, width, series)
        r = here[name][element]
        colour, _, marker = SERIES[series]
        lower.plot(
            r.angle_deg,
            sign * r.pull,
            linestyle="none",
            marker=marker,
            markersize=2.4,
            color=colour,
            markerfacecolor="white",
            markeredgewidth=0.7,
        )
    upper.errorbar(
        first.angle_deg,
        sign * first.measured,
        first.measured_sd,
        fmt="none",
        ecolor="black",
        elinewidth=0.7,
        zorder=5,
    )
    upper.plot(
        first.angle_deg,
        sign * first.measured,
        linestyle="none",
        marker=".",
        markersize=3.0,
        color="black",
        zorder=6,
    )
    if element == BRIGHTNESS:
        plain_log_ticks(upper.yaxis, *upper.get_ylim())
    else:
        ratio_axis(upper)
    reach = max(3.0, *(float(np.abs(here[n][element].pull).max()) for n in names))
    lower.set_ylim(-1.1 * reach, 1.1 * reach)
    lower.axhline(0.0, color="#555555", linewidth=0.6)
    for at in (-2.0, 2.0):
        lower.axhline(at, color="#555555", linewidth=0.6, linestyle=":")


def _together(
    model: Model, value: FloatArray, width: FloatArray, own: Residuals, first: Residuals
) -> tuple[FloatArray, FloatArray]:
    scale = float(np.median(first.measured / own.measured))
    return scale * value, scale * width


def fitted_sizes(stem: str, verdict: Verdict) -> Picture:
    """The fitted size distribution with the spread of the bootstrap.

    Parameters
    ----------
    stem : str
        Name of the measurement.
    verdict : Verdict
    """
    best: Fit = verdict.best
    radius = best.problem.radius_um
    low, high = verdict.interval("area")
    figure = Figure(figsize=(3.4, 2.5))
    axes = figure.subplots()
    names = best.problem.particles
    rows = []
    for series, name in enumerate(names):
        colour, line, marker = SERIES[series % len(SERIES)]
        axes.fill_between(radius, low[series], high[series], color=colour, alpha=0.22, linewidth=0)
        axes.plot(
            radius, best.area[series], color=colour, linestyle=line, marker=marker, markersize=2.6
        )
        rows += [
            [name, radius[i], best.area[series, i], low[series, i], high[series, i]]
            for i in range(radius.size)
        ]
    axes.set_xscale("log")
    plain_log_ticks(axes.xaxis, float(radius[0]), float(radius[-1]))
    axes.set_ylim(bottom=0.0)
    axes.set_xlabel("radius (µm)")
    axes.set_ylabel("area per unit of ln r (total 1)")
    series_legend(figure, axes, list(names))
    ends = verdict.interval("effective_radius_um")
    said = (
        f"effective radius {best.effective_radius_um:.3g} µm ({ends[0]:.3g} to {ends[1]:.3g}), "
        f"effective variance {best.effective_variance:.2g}"
    )
    return Picture(
        stem=f"sizes-{stem}",
        title=f"Fitted sizes: {stem}",
        caption=(
            f"Projected area per unit of ln r of the non-negative, smoothed fit: {said}. Bands: "
            "from 2.5 to 97.5 % of a bootstrap over the errors measured and the strength of the "
            "smoothing."
        ),
        alt=f"Fitted size distribution of {', '.join(names)} against radius: {said}.",
        figure=figure,
        header=["particle", "radius (µm)", "area per ln r", "2.5 %", "97.5 %"],
        rows=rows,
    )
