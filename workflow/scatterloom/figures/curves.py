"""Matrix elements against scattering angle, with their error bands."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from scatterloom.figures.axes import ANGLE_LABEL, angle_axis, plain_log_ticks, ratio_axis
from scatterloom.figures.picture import BAND, SERIES, Picture
from scatterloom.figures.selection import FloatArray, Ladder, spread_sizes, thinned
from scatterloom.scattering.elements import RATIOS, ratio

SIZES_SHOWN = 4
LABELS = {
    "f22_f11": "$F_{22}/F_{11}$",
    "f33_f11": "$F_{33}/F_{11}$",
    "f44_f11": "$F_{44}/F_{11}$",
    "minus_f12_f11": "$-F_{12}/F_{11}$",
    "f34_f11": "$F_{34}/F_{11}$",
}


def draw_curve(axes: Axes, angles_deg: FloatArray, value: FloatArray, series: int) -> None:
    """Draw one curve; its markers are set apart from those of other series."""
    colour, line, marker = SERIES[series % len(SERIES)]
    # Nine markers at most, each series shifted, so that curves which coincide can be told.
    every = max(1, angles_deg.size // 8)
    axes.plot(
        angles_deg,
        value,
        color=colour,
        linestyle=line,
        marker=marker,
        markevery=((series * every) // 5, every),
        markerfacecolor="white",
        markeredgewidth=0.8,
    )


def draw_band(
    axes: Axes, angles_deg: FloatArray, value: FloatArray, half_width: FloatArray, series: int
) -> None:
    """Draw one curve with its band."""
    colour = SERIES[series % len(SERIES)][0]
    low, high = value - half_width, value + half_width
    if axes.get_yscale() == "log":
        low = np.maximum(low, 1e-3 * value)
    axes.fill_between(angles_deg, low, high, color=colour, alpha=0.22, linewidth=0)
    draw_curve(axes, angles_deg, value, series)


def series_legend(figure: Figure, axes: Axes, labels: list[str]) -> None:
    """Put the legend of the curves in `axes`, which all panels share, under the panels."""
    handles = [
        axes.plot(
            [], [], color=c, linestyle=line, marker=m, markerfacecolor="white", markeredgewidth=0.8
        )[0]
        for c, line, m in (SERIES[i % len(SERIES)] for i in range(len(labels)))
    ]
    figure.legend(
        handles, labels, loc="outside lower center", ncols=len(labels) if len(labels) < 4 else 2
    )


def matrix_curves(ladder: Ladder) -> Picture:
    """F11, five ratios and their half widths for a few sizes of one particle at one wavelength.

    Half widths have panels of their own: a band of less than a percent cannot be seen.

    Parameters
    ----------
    ladder : Ladder
        With at least one solved size.

    Returns
    -------
    Picture

    Raises
    ------
    ValueError
        If no size is solved.
    """
    sizes = spread_sizes(ladder, SIZES_SHOWN)
    if sizes.size == 0:
        raise ValueError(f"no solved size of {ladder.words}")
    figure = Figure(figsize=(3.4, 5.7))
    *panels, width_f11, width_ratios = figure.subplots(4, 2, sharex=True).ravel()
    for panel in (panels[0], width_f11, width_ratios):
        panel.set_yscale("log")
    panels[0].set_title("$F_{11}$, mean 1")
    width_f11.set_title("half width of $F_{11}$ (%)")
    width_ratios.set_title("half width, widest ratio")
    angles = ladder.angle_deg
    rows: list[list[float]] = []
    keep = thinned(angles)
    for series, size in enumerate(sizes):
        f, h, relative = (
            a[size] for a in (ladder.matrix, ladder.half_width, ladder.ratio_half_width)
        )
        draw_band(panels[0], angles, f[:, 0, 0], h[:, 0, 0], series)
        draw_curve(width_f11, angles, _positive(100.0 * relative[:, 0, 0]), series)
        columns = [f[:, 0, 0], h[:, 0, 0]]
        for panel, which in zip(panels[1:], RATIOS, strict=True):
            value, half_width = ratio(f, relative, which)
            draw_band(panel, angles, value, half_width, series)
            columns += [value, half_width]
        draw_curve(width_ratios, angles, _positive(np.max(columns[3::2], axis=0)), series)
        x = ladder.size_parameter[size]
        rows += [[x, angles[i], *(column[i] for column in columns)] for i in keep]
    for panel, which in zip(panels[1:], RATIOS, strict=True):
        panel.set_title(LABELS[which.name])
        ratio_axis(panel)
        if which.signed:
            panel.axhline(0.0, color="#555555", linewidth=0.6, zorder=1)
    angle_axis(panels[0], angles)
    for panel in (width_f11, width_ratios):
        panel.set_xlabel(ANGLE_LABEL)
        plain_log_ticks(panel.yaxis, *panel.get_ylim())
    labels = [f"x = {ladder.size_parameter[s]:.3g}" for s in sizes]
    series_legend(figure, panels[0], labels)

    header = ["size parameter", "angle (deg)", "F11", "F11 half width"]
    for which in RATIOS:
        header += [which.label, f"{which.label} half width"]
    listed = ", ".join(
        f"{ladder.size_parameter[s]:.3g} ({ladder.radius_um[s]:.3g} µm)" for s in sizes
    )
    return Picture(
        stem=f"matrix-{ladder.stem}",
        title=f"Scattering matrix: {ladder.particle}, {ladder.wavelength_um:g} µm",
        caption=(
            f"Elements of the orientation-averaged scattering matrix of {ladder.words}, for size "
            f"parameters (and radii) of the equal-volume sphere of {listed}. {BAND} The "
            "last two panels show the half widths themselves: of F11 in percent, and the widest of "
            "the five ratios."
        ),
        alt=_in_words(ladder, int(sizes[-1])),
        figure=figure,
        header=header,
        rows=rows,
    )


def _positive(values: FloatArray) -> FloatArray:
    """Leave out what a logarithmic axis cannot show."""
    return np.where(values > 0.0, values, np.nan)


def _in_words(ladder: Ladder, size: int) -> str:
    f, angles = ladder.matrix[size], ladder.angle_deg
    f11 = f[:, 0, 0]
    low = int(f11.argmin())
    worst = 100.0 * float(ladder.ratio_half_width[size, :, 0, 0].max())
    polarization = -f[:, 0, 1] / f11
    most, least = int(polarization.argmax()), int(polarization.argmin())
    return (
        f"Eight panels of curves against scattering angle for {ladder.particle}. At the largest "
        f"size, x = {ladder.size_parameter[size]:.3g}, F11 goes from {f11[0]:.3g} at "
        f"{angles[0]:g} degrees through a minimum of {f11[low]:.3g} at {angles[low]:g} degrees to "
        f"{f11[-1]:.3g} at {angles[-1]:g} degrees; -F12/F11 lies between "
        f"{polarization[least]:.2f} at {angles[least]:g} degrees and {polarization[most]:.2f} at "
        f"{angles[most]:g} degrees. There the half width of F11 reaches {worst:.2g} percent."
    )
