"""Maps over size parameter and scattering angle."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from scatterloom.figures.axes import ANGLE_LABEL, angle_axis, plain_log_ticks
from scatterloom.figures.picture import Picture
from scatterloom.figures.selection import FloatArray, Ladder, spread_sizes, thinned

FEWEST_SIZES = 4
_GAP = "#b0b0b0"


def edges(centres: FloatArray) -> FloatArray:
    """Edges of cells around increasing centres, for a mesh."""
    middle = 0.5 * (centres[1:] + centres[:-1])
    first, last = 2 * centres[0] - middle[0], 2 * centres[-1] - middle[-1]
    return np.concatenate([[first], middle, [last]])


def size_angle_map(ladder: Ladder) -> Picture:
    """Map of log10 F11 and of -F12/F11 over size parameter and scattering angle.

    Parameters
    ----------
    ladder : Ladder
        With at least `FEWEST_SIZES` solved sizes.

    Returns
    -------
    Picture

    Raises
    ------
    ValueError
        If there are fewer solved sizes or fewer than two angles.
    """
    if int(ladder.solved.sum()) < FEWEST_SIZES or ladder.angle_deg.size < 2:
        raise ValueError(f"a map needs {FEWEST_SIZES} solved sizes and two angles: {ladder.words}")
    f11 = np.where(ladder.solved[:, None], ladder.matrix[:, :, 0, 0], np.nan)
    polarization = -np.where(ladder.solved[:, None], ladder.matrix[:, :, 0, 1], np.nan) / f11
    brightness = np.log10(f11)
    figure = Figure(figsize=(3.4, 4.2))
    upper, lower = figure.subplots(2, 1, sharex=True)
    angles, x = ladder.angle_deg, ladder.size_parameter

    low, high = math.floor(np.nanmin(brightness)), math.ceil(np.nanmax(brightness))
    _mesh(figure, upper, ladder, brightness, "cividis", (low, max(high, low + 1)), "log$_{10}$")
    _lines(upper, ladder, brightness, np.arange(low + 1.0, high), "%g", "white")
    upper.set_title("$F_{11}$, mean 1")

    reach = max(0.1, math.ceil(10 * float(np.nanmax(np.abs(polarization)))) / 10)
    _mesh(figure, lower, ladder, polarization, "PuOr_r", (-reach, reach), "")
    _lines(lower, ladder, polarization, np.array([0.0]), None, "black", 1.1)
    marks = np.array([-0.5, 0.5]) if reach > 0.6 else np.array([-0.5, 0.5]) * reach
    _lines(lower, ladder, polarization, marks, None, "black", 0.6)
    lower.set_title("$-F_{12}/F_{11}$")
    lower.set_xlabel(ANGLE_LABEL)
    angle_axis(lower, angles)

    sizes, keep = spread_sizes(ladder, 8), thinned(angles, 20.0)
    rows = [
        [x[s], ladder.radius_um[s], angles[a], f11[s, a], polarization[s, a]]
        for s in sizes
        for a in keep
    ]
    s, a = np.unravel_index(int(np.nanargmax(polarization)), polarization.shape)
    t, b = np.unravel_index(int(np.nanargmin(polarization)), polarization.shape)
    return Picture(
        stem=f"map-{ladder.stem}",
        title=f"Size and angle: {ladder.particle}, {ladder.wavelength_um:g} µm",
        caption=(
            f"F11 (logarithm, contours at whole decades) and -F12/F11 (thick contours at 0, "
            f"thin ones at {marks[0]:.2g}, dashed, and {marks[1]:.2g}) of {ladder.words}, over "
            "the size parameter of the equal-volume sphere. Grey: not solved."
        ),
        alt=(
            f"Two maps over scattering angle and size parameter {x[0]:.3g} to {x[-1]:.3g} for "
            f"{ladder.particle}. F11 lies between {np.nanmin(f11):.3g} and {np.nanmax(f11):.3g}. "
            f"-F12/F11 is highest, {polarization[s, a]:.2f}, at x = {x[s]:.3g} and "
            f"{angles[a]:g} degrees, and lowest, {polarization[t, b]:.2f}, at x = {x[t]:.3g} and "
            f"{angles[b]:g} degrees."
        ),
        figure=figure,
        header=["size parameter", "radius (µm)", "angle (deg)", "F11", "-F12/F11"],
        rows=rows,
    )


def _mesh(
    figure: Figure,
    axes: Axes,
    ladder: Ladder,
    values: FloatArray,
    colours: str,
    limits: tuple[float, float],
    label: str,
) -> None:
    axes.set_facecolor(_GAP)
    axes.grid(False)
    x = ladder.size_parameter
    mesh = axes.pcolormesh(
        np.clip(edges(ladder.angle_deg), 0.0, 180.0),
        np.exp(edges(np.log(x))),
        np.ma.masked_invalid(values),
        cmap=colours,
        vmin=limits[0],
        vmax=limits[1],
        rasterized=True,  # a vector mesh of a full table would take megabytes
    )
    axes.set_yscale("log")
    plain_log_ticks(axes.yaxis, float(x[0]), float(x[-1]))
    axes.set_ylabel("size parameter")
    bar = figure.colorbar(mesh, ax=axes, pad=0.02, aspect=18)
    bar.ax.set_title(label, fontsize=6.5, loc="left")
    bar.outline.set_linewidth(0.5)


def _lines(
    axes: Axes,
    ladder: Ladder,
    values: FloatArray,
    levels: FloatArray,
    form: str | None,
    colour: str,
    width: float = 0.7,
) -> None:
    inside = levels[(levels > np.nanmin(values)) & (levels < np.nanmax(values))]
    # Polarization is zero all along 0 and 180 degrees: rounding there is no contour.
    kept = (ladder.angle_deg > 0.0) & (ladder.angle_deg < 180.0)
    if inside.size == 0 or kept.sum() < 2:
        return
    lines = axes.contour(
        ladder.angle_deg[kept],
        ladder.size_parameter,
        np.ma.masked_invalid(values[:, kept]),
        levels=inside,
        colors=colour,
        linewidths=width,
        linestyles=["dashed" if level < 0 and form is None else "solid" for level in inside],
    )
    if form is not None:
        axes.clabel(lines, fmt=form, fontsize=5.5, inline_spacing=2)
