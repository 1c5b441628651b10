"""What a measurement asks of a table: matrices for every unit of every unknown.

The unknown is the projected area per unit of ln r of each particle, piecewise linear in
ln r between nodes; the table's matrices times scattering efficiency are taken cubic in
ln r between its sizes, and the product of both is integrated exactly.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from scatterloom.bulk.compare import check_angles, linear, match_wavelength
from scatterloom.bulk.measurement import Measurement
from scatterloom.bulk.weights import size_weights
from scatterloom.errors import BadInput
from scatterloom.scattering.record import has_result

if TYPE_CHECKING:
    import xarray

FloatArray = NDArray[np.float64]

MOST_NODES = 30
FEWEST_SIZES = 4


@dataclass(frozen=True)
class Kernel:
    """What one unit of every unknown gives at one wavelength.

    Attributes
    ----------
    measured : Measurement
        The rows of this wavelength.
    matrix : float64 (n_unknown, n_row, 4, 4)
        Unnormalized matrices at the measured angles.
    half_width, ratio_half_width : float64 (n_unknown, n_row, 4, 4)
        Of the elements, and of the elements over F11.
    table_matrix : float64 (n_unknown, n_angle, 4, 4)
        The same on the angles of the table, with its half widths.
    """

    measured: Measurement
    matrix: FloatArray
    half_width: FloatArray
    ratio_half_width: FloatArray
    table_matrix: FloatArray
    table_half_width: FloatArray
    table_ratio_half_width: FloatArray


@dataclass(frozen=True)
class Problem:
    """A measurement and what can explain it.

    Attributes
    ----------
    particles : tuple of str
    radius_um : float64 (n_node,)
        Nodes of the distribution [um], the same for every particle.
    kernels : tuple of Kernel
        One for each wavelength.
    angle_deg : float64 (n_angle,)
        Of the table.
    """

    particles: tuple[str, ...]
    radius_um: FloatArray
    kernels: tuple[Kernel, ...]
    angle_deg: FloatArray

    @property
    def unknowns(self) -> int:
        return len(self.particles) * self.radius_um.size


def pose(table: xarray.Dataset, measurement: Measurement, particles: Sequence[str]) -> Problem:
    """Make the linear problem of a measurement.

    Raises
    ------
    BadInput
        If wavelengths or angles of the table do not serve, or a particle has fewer than
        four solved sizes in common at all wavelengths.
    """
    names = [str(n) for n in table["particle"].values]
    waves = np.asarray(table["wavelength"].values, dtype=np.float64)
    angles = np.asarray(table["angle"].values, dtype=np.float64)
    check_angles(measurement, angles)
    columns = {w: match_wavelength(w, waves, measurement.file) for w in measurement.wavelengths}
    ladders = {}
    for name in particles:
        for w, column in columns.items():
            part = table.isel(particle=names.index(name), wavelength=column)
            part = part.isel(size=np.flatnonzero(has_result(part["status"].values)))
            if part.sizes["size"] < FEWEST_SIZES:
                raise BadInput(f"{name} has fewer than {FEWEST_SIZES} solved sizes at {w:g} um")
            ladders[name, w] = part
    radii = [np.asarray(part["radius_um"].values) for part in ladders.values()]
    low, high = max(r[0] for r in radii), min(r[-1] for r in radii)
    if low >= high:
        raise BadInput("the sizes of the table at the measured wavelengths do not overlap")
    fewest = min(int(((r >= low * (1 - 1e-9)) & (r <= high * (1 + 1e-9))).sum()) for r in radii)
    nodes = np.geomspace(low, high, max(FEWEST_SIZES, min(MOST_NODES, fewest)))
    kernels = []
    for w in measurement.wavelengths:
        rows = measurement.at(w)
        blocks = [_block(ladders[name, w], nodes) for name in particles]
        full = [np.concatenate([block[i] for block in blocks]) for i in range(3)]
        f11 = full[0][..., :1, :1]
        at = CubicSpline(angles, full[0], axis=1)(rows.angle_deg)
        width, ratio = (
            np.stack([linear(angles, one, rows.angle_deg) for one in full[i]]) for i in (1, 2)
        )
        ratio_full = np.divide(full[2], f11, out=np.zeros_like(full[2]), where=f11 > 0.0)
        f11_at = at[..., :1, :1]
        ratio_at = np.divide(ratio, f11_at, out=np.zeros_like(ratio), where=f11_at > 0.0)
        kernels.append(Kernel(rows, at, width, ratio_at, full[0], full[1], ratio_full))
    return Problem(tuple(particles), nodes, tuple(kernels), angles)


def _block(part: xarray.Dataset, nodes: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Matrices times scattering efficiency, integrated over the hat function of each node."""
    radius = np.asarray(part["radius_um"].values, dtype=np.float64)
    q = np.asarray(part["scattering_efficiency"].values)[:, None, None, None]
    f = np.asarray(part["scattering_matrix"].values)
    width = np.asarray(part["scattering_matrix_error"].values, dtype=np.float64)
    ratio = np.asarray(part["scattering_matrix_ratio_error"].values, dtype=np.float64)
    u = np.log(nodes)

    def hat(position: int) -> FloatArray:
        row = np.eye(u.size)[position]
        return size_weights(
            radius,
            lambda r: np.interp(np.log(r), u, row),
            float(u[1] - u[0]),
            breaks_um=tuple(nodes),
        )

    weight = np.stack([hat(position) for position in range(u.size)])
    size = np.abs(weight)
    return (
        np.tensordot(weight, q * f, axes=1),
        np.tensordot(size, q * width, axes=1),
        np.tensordot(size, q * ratio * f[..., :1, :1], axes=1),
    )


def node_steps(radius_um: FloatArray) -> FloatArray:
    """Integrals of the hat functions over ln r."""
    u = np.log(radius_um)
    return np.asarray(0.5 * (np.diff(u, prepend=u[0]) + np.diff(u, append=u[-1])))
