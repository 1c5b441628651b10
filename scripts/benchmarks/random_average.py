"""Random orientation from plane waves: what the textbook way needs for one case.

Directions of incidence are a Lebedev rule cut down by the symmetry that a spheroid keeps on
a cubic lattice, scattering planes a regular grid of azimuths.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import lebedev_rule

from benchmarks.reference import PointDipoles
from oracles.mueller import mueller, scattering_plane

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Average:
    """Randomly oriented particle: extinction efficiency and matrix with a mean F11 of 1."""

    extinction_efficiency: float
    matrix: FloatArray


def folded_directions(degree: int) -> tuple[FloatArray, FloatArray]:
    """Directions (n, 3) of a Lebedev rule that a spheroid's symmetry leaves, weights (sum 1).

    The three mirror planes leave one octant, the exchange of x and y half of it.
    """
    point, weight = lebedev_rule(degree)
    x, y, _ = point
    keep = np.all(point > -1e-12, axis=0) & (x > y - 1e-12)
    images = 2.0 ** np.sum(point[:, keep] > 1e-12, axis=0) * np.where(x - y > 1e-12, 2, 1)[keep]
    chosen = weight[keep] * images
    return point[:, keep].T, chosen / chosen.sum()


def transverse(direction: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Two unit vectors across a direction, for its two polarizations."""
    helper = np.eye(3)[int(np.argmin(np.abs(direction)))]
    first = np.cross(helper, direction)
    first /= np.linalg.norm(first)
    return first, np.cross(direction, first)


def mueller_of_incidence(
    particle: PointDipoles,
    dipoles: tuple[NDArray[np.complex128], NDArray[np.complex128]],
    direction: FloatArray,
    angles_deg: FloatArray,
    azimuths: int,
) -> FloatArray:
    """Matrix averaged over the scattering planes of one incidence, (n_angle, 4, 4), times k^2.

    Angles 0 and 180 have no plane of their own; the limit at 1e-4 rad takes their place.
    """
    one, two = transverse(direction)
    theta = np.clip(np.radians(angles_deg), 1e-4, np.pi - 1e-4)
    turn = (np.arange(azimuths) + 0.5) * 2 * np.pi / azimuths
    ring = np.cos(turn)[:, None] * one + np.sin(turn)[:, None] * two
    scattered = (
        np.cos(theta)[:, None, None] * direction + np.sin(theta)[:, None, None] * ring
    ).reshape(-1, 3)
    perp, par_i, par_s = scattering_plane(direction, scattered)
    fields = [particle.far_field(d, scattered) for d in dipoles]
    amplitude = {}
    for name, incoming in (("par", par_i), ("perp", perp)):
        total = sum((incoming @ e)[:, None] * f for e, f in zip((one, two), fields, strict=True))
        for out, vector in (("par", par_s), ("perp", perp)):
            amplitude[out, name] = -1j * np.sum(vector * total, axis=1)
    matrix = mueller(
        amplitude["perp", "perp"],
        amplitude["par", "par"],
        amplitude["par", "perp"],
        amplitude["perp", "par"],
    )
    return matrix.reshape(len(theta), azimuths, 4, 4).mean(axis=1)


def extinction_efficiency(
    dipoles: NDArray[np.complex128],
    particle: PointDipoles,
    direction: FloatArray,
    polarization: FloatArray,
    size_parameter: float,
) -> float:
    """Optical theorem for one plane wave (Draine 1988, Astrophys. J. 333, 848, eq. 3.02)."""
    forward = np.exp(-1j * (particle.positions() @ direction))
    work = np.sum(polarization @ dipoles * forward)
    return float(4 * np.pi * work.imag / (np.pi * size_parameter**2))
