"""Maps of the light that oriented particles scatter over the sphere of directions."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.colors import LogNorm, Normalize
from matplotlib.figure import Figure

from scatterloom.figures.picture import Picture

if TYPE_CHECKING:
    import xarray


def direction_map(table: xarray.Dataset, name: str, particle: int, wavelength: int) -> Picture:
    """Scattered intensity and its polarization over directions, for unpolarized light.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table of oriented particles.
    name : str
        Of the distribution.
    particle, wavelength : int
        Positions; the size in the middle of the solved ones is drawn, at the first incidence.

    Raises
    ------
    ValueError
        If no size is solved, or the directions do not span a map.
    """
    cell = table.isel(particle=particle, wavelength=wavelength, incidence=0)
    solved = np.flatnonzero(cell["status"].values > 0)
    if not solved.size:
        raise ValueError(f"{name}: no size is solved")
    zenith, azimuth = cell["zenith"].values, cell["azimuth"].values
    if zenith.size < 3 or azimuth.size < 3:
        raise ValueError(f"{name}: fewer than three zenith angles or azimuths")
    size = int(solved[solved.size // 2])
    matrix = cell["phase_matrix"].isel(size=size).values
    bars = cell["phase_matrix_error"].isel(size=size).values
    intensity = matrix[..., 0, 0]
    degree = np.hypot(matrix[..., 1, 0], matrix[..., 2, 0]) / intensity
    figure = Figure(figsize=(7.0, 3.4), layout="constrained")
    lit = float(cell["incidence"].values)
    low = max(float(intensity.min()), float(intensity.max()) * 1e-5)
    norms = (LogNorm(low, float(intensity.max())), Normalize(0.0, 1.0))
    words = ("phase matrix element 11 (sr$^{-1}$)", "degree of linear polarization")
    for column, (values, norm, label) in enumerate(
        zip((intensity, degree), norms, words, strict=True)
    ):
        axes = figure.add_subplot(1, 2, column + 1)
        turned, around = _around(azimuth, np.clip(values, norm.vmin, None))
        mesh = axes.pcolormesh(
            turned, zenith, around, norm=norm, cmap="cividis", shading="gouraud", rasterized=True
        )
        axes.plot(0.0, lit, marker="x", color="white", markersize=8, markeredgewidth=2.5)
        axes.plot(0.0, lit, marker="x", color="black", markersize=7, markeredgewidth=1.2)
        axes.set_xlabel("azimuth (deg)")
        axes.set_ylabel("zenith angle (deg)")
        axes.set_xlim(-180.0, 180.0)
        axes.set_xticks([-180, -90, 0, 90, 180])
        axes.set_yticks([0, 45, 90, 135, 180])
        axes.invert_yaxis()
        figure.colorbar(mesh, ax=axes, label=label, location="bottom", shrink=0.9)
    who = str(cell["particle"].values)
    where = f"{float(cell['wavelength'].values):g} um"
    x = float(cell["size_parameter"].isel(size=size).values)
    width = 100.0 * float(np.median(bars[..., 0, 0] / intensity))
    rows = [
        [float(z), float(a), float(intensity[i, j]), float(bars[i, j, 0, 0]), float(degree[i, j])]
        for i, z in enumerate(zenith)
        for j, a in enumerate(azimuth)
    ]
    return Picture(
        stem=f"oriented-{name}-{who}-{where.replace(' ', '')}",
        title=f"Oriented particles: {name}, {who}, {where}",
        caption=(
            f"Unpolarized light scattered into all directions by {who} at {where}, size parameter "
            f"{x:.3g}, distribution {name}, light travelling at a zenith angle of {lit:g} degrees "
            "(cross: the forward direction). "
            f"The 95 % half width of the intensity is {width:.2g} % (median)."
        ),
        alt=f"Two maps over azimuth and zenith angle: intensity and polarization of {who}",
        figure=figure,
        header=[
            "zenith_deg",
            "azimuth_deg",
            "phase_matrix_11_per_sr",
            "phase_matrix_11_error_per_sr",
            "degree_of_linear_polarization",
        ],
        rows=rows,
    )


def _around(azimuth: np.ndarray, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Azimuths from -180 to 180 degrees with the values at them, closed at both ends."""
    turned = (azimuth + 180.0) % 360.0 - 180.0
    order = np.argsort(turned)
    turned, values = turned[order], values[:, order]
    # Linear between the last and the first azimuth, which are neighbours.
    gap = turned[0] + 360.0 - turned[-1]
    share = (180.0 - turned[-1]) / gap
    seam = (1.0 - share) * values[:, -1:] + share * values[:, :1]
    if turned[0] > -180.0:
        turned, values = np.append(-180.0, turned), np.hstack([seam, values])
    return np.append(turned, 180.0), np.hstack([values, seam])
