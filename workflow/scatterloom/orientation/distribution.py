"""Distributions of orientation other than random: lists, and tilts about the vertical."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.orientation.rules import gauss_nodes

_FOR_THE_DENSITY = 20
"""Gauss-Legendre nodes that integrate a density over its support to 1e-9 (measured)."""


@dataclass(frozen=True)
class Tilts:
    """Tilts of the particle's axis from the vertical, all azimuths and turns alike.

    Attributes
    ----------
    beta : float64 (n_beta,) [rad]
        Angle between the particle's z axis and the vertical.
    weight : float64 (n_beta,)
        Add up to one.
    """

    beta: NDArray[np.float64]
    weight: NDArray[np.float64]


@dataclass(frozen=True)
class Directions:
    """Single orientations.

    Attributes
    ----------
    euler : float64 (n_orientation, 3) [rad]
        Angles alpha, beta, gamma: the particle is turned by gamma about the vertical, then by
        beta about the horizontal axis y, then by alpha about the vertical.
    weight : float64 (n_orientation,)
        Add up to one.
    """

    euler: NDArray[np.float64]
    weight: NDArray[np.float64]


def listed(euler_deg: Sequence[Sequence[float]], weights: Sequence[float]) -> Directions:
    """Orientations of a list, angles in degrees; weights on any scale."""
    share = np.asarray(weights, dtype=np.float64)
    return Directions(np.radians(np.asarray(euler_deg, dtype=np.float64)), share / share.sum())


def uniform_tilt(largest_deg: float, degree: int) -> Tilts:
    """Axes spread evenly over the cap of directions within an angle of the vertical.

    Parameters
    ----------
    largest_deg : float [deg]
        180 for random orientation.
    degree : int
        Degree of the polynomials in cos(beta) that are averaged exactly.
    """
    node, weight = gauss_nodes(degree // 2 + 1)
    low = math.cos(math.radians(largest_deg))
    cosine = low + (1.0 - low) * 0.5 * (node + 1.0)
    return Tilts(np.arccos(cosine), 0.5 * weight)


def normal_tilt(sd_deg: float, degree: int) -> Tilts:
    """Tilts distributed as exp(-beta^2 / 2 s^2) sin(beta), a normal distribution about zero.

    Parameters
    ----------
    sd_deg : float [deg]
        The parameter s: for small ones that of the tilt in either of two vertical planes.
    degree : int
        As in `uniform_tilt`; here the nodes resolve such polynomials times the density.
    """
    sd = math.radians(sd_deg)
    return _weighted(min(math.pi, 7.0 * sd), degree, lambda beta: np.exp(-0.5 * (beta / sd) ** 2))


def fisher_tilt(concentration: float, degree: int) -> Tilts:
    """Tilts of a Fisher distribution of axes, exp(kappa cos(beta)) sin(beta).

    Fisher 1953, Proc. R. Soc. A 217, 295 (from memory).

    Parameters
    ----------
    concentration : float
        Kappa; zero for random orientation.
    degree : int
        As in `normal_tilt`.
    """
    reach = math.pi
    if concentration > 25.0:
        # 1 - cos(beta) where the density has fallen to exp(-25) of its peak.
        reach = math.acos(max(-1.0, 1.0 - 25.0 / concentration))
    return _weighted(reach, degree, lambda beta: np.exp(concentration * (np.cos(beta) - 1.0)))


def _weighted(reach: float, degree: int, density) -> Tilts:  # type: ignore[no-untyped-def]
    """Rule over [0, reach] in beta for a smooth density times sin(beta)."""
    # n nodes integrate exp(i k x) over [-1, 1] once 2 n exceeds k by some more.
    node, weight = gauss_nodes(math.ceil(0.25 * degree * reach) + _FOR_THE_DENSITY)
    beta = 0.5 * reach * (node + 1.0)
    mass = weight * density(beta) * np.sin(beta)
    return Tilts(beta, mass / mass.sum())
