"""Small randomly oriented ellipsoid (Bohren & Huffman 1983, ch. 5), leading order in size.

Lengths in units of the equal-volume-sphere radius, time factor exp(-i w t).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import elliprd


def depolarization_factors(half_axes) -> NDArray[np.float64]:
    """L_x, L_y, L_z of an ellipsoid (Bohren & Huffman 1983, sec. 5.3); they add to 1.

    The integrals are Carlson's R_D: L_x = a b c R_D(b^2, c^2, a^2) / 3.
    """
    a, b, c = (float(h) ** 2 for h in half_axes)
    product = np.sqrt(a * b * c) / 3
    return product * np.array([elliprd(b, c, a), elliprd(c, a, b), elliprd(a, b, c)])


def polarizabilities(half_axes, index: complex) -> NDArray[np.complex128]:
    """Polarizability along each axis over the volume (Bohren & Huffman 1983, sec. 5.3)."""
    susceptibility = complex(index) ** 2 - 1
    return susceptibility / (1 + depolarization_factors(half_axes) * susceptibility)


def efficiencies(half_axes, index: complex, size_parameter: float) -> dict[str, float]:
    """Orientation-averaged efficiencies, to the cross section of the equal-volume sphere.

    Bohren & Huffman 1983, sec. 5.5; extinction is the sum of the other two.
    """
    alpha = polarizabilities(half_axes, index)
    x = size_parameter
    absorption = 4 * x / 3 * np.mean(alpha.imag)
    scattering = 8 * x**4 / 27 * np.mean(np.abs(alpha) ** 2)
    return {
        "extinction_efficiency": float(absorption + scattering),
        "scattering_efficiency": float(scattering),
        "absorption_efficiency": float(absorption),
        "asymmetry_parameter": 0.0,
    }


def scattering_matrix(half_axes, index: complex, angles_deg) -> NDArray[np.float64]:
    """Orientation-averaged Mueller matrix (n_angle, 4, 4) with a mean F11 of 1.

    Averages over all rotations of a symmetric tensor are of the form
    <t_ij t_kl*> = a d_ij d_kl + b (d_ik d_jl + d_il d_jk); both contractions of it
    give a and b, and the products of amplitudes follow (Bohren & Huffman 1983, sec. 5.5).
    """
    alpha = polarizabilities(half_axes, index)
    trace, norm = abs(alpha.sum()) ** 2, np.sum(np.abs(alpha) ** 2)
    a, b = (2 * trace - norm) / 15, (3 * norm - trace) / 30
    mu = np.cos(np.radians(np.asarray(angles_deg, float)))
    matrix = np.zeros((*mu.shape, 4, 4))
    matrix[..., 0, 0] = (a + b) * (1 + mu**2) / 2 + 2 * b
    matrix[..., 1, 1] = (a + b) * (1 + mu**2) / 2
    matrix[..., 0, 1] = matrix[..., 1, 0] = -(a + b) * (1 - mu**2) / 2
    matrix[..., 2, 2] = (a + b) * mu
    matrix[..., 3, 3] = (a - b) * mu
    return matrix / (2 / 3 * (a + b) + 2 * b)
