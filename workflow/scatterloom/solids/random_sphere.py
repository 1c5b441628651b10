"""Gaussian random spheres: log-normal radii with a stated correlation.

Muinonen, Nousiainen, Fast, Lumme & Peltoniemi (1996), J. Quant. Spectrosc. Radiat. Transfer
55, 577 (from memory).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import spherical_in

from scatterloom.solids.globe import star_mesh
from scatterloom.solids.mesh import Mesh
from scatterloom.solids.seeds import generator

Floats = NDArray[np.float64]

HIGHEST_DEGREE = 24


def power_law(exponent: float, highest: int) -> Floats:
    """Shares c_l ~ l^-exponent of the degrees 2 to the highest, which add to 1.

    Degree 1 would shift the body and degree 0 scale it.
    """
    degree = np.arange(highest + 1, dtype=float)
    share = np.zeros(highest + 1)
    share[2:] = degree[2:] ** -exponent
    return share / share.sum()


def correlation_angle(angle_deg: float, highest: int = HIGHEST_DEGREE) -> Floats:
    """Shares of the degrees for the correlation exp(-2 sin^2(g/2) / l^2), l = 2 sin(angle/2).

    With z = 1 / l^2 they are (2 n + 1) exp(-z) i_n(z), i_n modified spherical Bessel
    functions (the plane-wave series at an imaginary argument).

    Raises
    ------
    ValueError
        If degrees above the highest hold more than 1e-3 of the variance.
    """
    z = 1.0 / (2.0 * math.sin(0.5 * math.radians(angle_deg))) ** 2
    degree = np.arange(highest + 1)
    share = (2 * degree + 1) * math.exp(-z) * spherical_in(degree, z)
    if share.sum() < 1.0 - 1e-3:
        raise ValueError(f"a correlation angle of {angle_deg:g} degrees needs more than "
                         f"{highest} degrees")  # fmt: skip
    return np.asarray(share / share.sum())


def logarithm(unit: Floats, coefficients: Floats) -> Floats:
    """Sum of real spherical harmonics, semi-normalized after Schmidt, float64 (n,).

    The squares of the functions of one degree add to 1 in every direction.

    Parameters
    ----------
    unit : float64 (n, 3)
        Unit vectors.
    coefficients : float64 (degrees, 2 * degrees - 1)
        Row l holds m = 0, then cosine and sine of m = 1, 2, ... l.
    """
    x, y, z = unit.T
    highest = len(coefficients) - 1
    out = np.zeros(len(unit))
    # sin^m cos(m phi), sin^m sin(m phi): no angle, no pole
    cosine, sine, diagonal = np.ones(len(unit)), np.zeros(len(unit)), 1.0
    for m in range(highest + 1):
        if m:
            cosine, sine = cosine * x - sine * y, sine * x + cosine * y
            diagonal *= math.sqrt((2 * m - 1) / (2 * m)) if m > 1 else 1.0
        before, now = np.zeros(len(unit)), np.full(len(unit), diagonal)
        for n in range(m, highest + 1):
            if n > m:
                root = math.sqrt(n * n - m * m)
                lower = math.sqrt((n - 1) ** 2 - m * m)
                before, now = now, ((2 * n - 1) * z * now - lower * before) / root
            if m == 0:
                out += coefficients[n, 0] * now
            else:
                wave = coefficients[n, 2 * m - 1] * cosine + coefficients[n, 2 * m] * sine
                out += wave * now
    return out


def random_coefficients(sigma: float, share: Floats, seed: int) -> Floats:
    """Normal coefficients of the logarithm of the radius, see `logarithm`.

    Parameters
    ----------
    sigma : float
        Standard deviation of the radius over its mean.
    share : float64 (degrees,)
        Part of the variance in every degree.
    seed : int
    """
    rng = generator(seed)
    variance = math.log1p(sigma**2)
    out = np.zeros((len(share), 2 * len(share) - 1))
    for n, part in enumerate(share):
        out[n, : 2 * n + 1] = math.sqrt(variance * part) * rng.standard_normal(2 * n + 1)
    return out


def gaussian_sphere(sigma: float, share: Floats, seed: int) -> Mesh:
    """A member of the family: radius exp(s) over sqrt(1 + sigma^2), with mean 1.

    See `random_coefficients`.
    """
    coefficients = random_coefficients(sigma, share, seed)
    shrink = 1.0 / math.sqrt(1.0 + sigma**2)
    return star_mesh(lambda unit: shrink * np.exp(logarithm(unit, coefficients)))
