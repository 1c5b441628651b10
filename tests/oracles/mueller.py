"""Amplitude matrix to Mueller matrix (Bohren & Huffman 1983, eq. 3.16)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def mueller(s1, s2, s3, s4) -> NDArray[np.float64]:
    """Scattering matrix of an amplitude matrix.

    Time factor exp(-i w t); E_par_s = S2 E_par_i + S3 E_perp_i and
    E_perp_s = S4 E_par_i + S1 E_perp_i, up to the common factor
    exp(ik(r-z))/(-ikr) (Bohren & Huffman 1983, eq. 3.12).

    Parameters
    ----------
    s1, s2, s3, s4 : complex array_like of equal shape

    Returns
    -------
    float64 (..., 4, 4)
    """
    s1, s2, s3, s4 = np.broadcast_arrays(*(np.asarray(s, complex) for s in (s1, s2, s3, s4)))
    p1, p2, p3, p4 = (np.abs(s) ** 2 for s in (s1, s2, s3, s4))
    c = np.conj
    elements = [
        [
            (p1 + p2 + p3 + p4) / 2,
            (p2 - p1 + p4 - p3) / 2,
            (s2 * c(s3) + s1 * c(s4)).real,
            (s2 * c(s3) - s1 * c(s4)).imag,
        ],
        [
            (p2 - p1 - p4 + p3) / 2,
            (p2 + p1 - p4 - p3) / 2,
            (s2 * c(s3) - s1 * c(s4)).real,
            (s2 * c(s3) + s1 * c(s4)).imag,
        ],
        [
            (s2 * c(s4) + s1 * c(s3)).real,
            (s2 * c(s4) - s1 * c(s3)).real,
            (s1 * c(s2) + s3 * c(s4)).real,
            (s2 * c(s1) + s4 * c(s3)).imag,
        ],
        [
            (s4 * c(s2) + s1 * c(s3)).imag,
            (s4 * c(s2) - s1 * c(s3)).imag,
            (s1 * c(s2) - s3 * c(s4)).imag,
            (s1 * c(s2) - s3 * c(s4)).real,
        ],
    ]
    return np.moveaxis(np.array(elements), (0, 1), (-2, -1))


def gauss_angles(count: int):
    """Scattering angles [deg] and weights (sum 2) of the Gauss-Legendre rule in the cosine."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return np.degrees(np.arccos(nodes))[::-1], weights[::-1]


def scattering_plane(incident, scattered):
    """Unit vectors e_perp, e_par of the incident and e_par of the scattered wave, (..., 3).

    `incident` and `scattered` are unit vectors along the propagation, not parallel to each
    other. e_perp = scattered x incident / |...| serves both waves and e_par = direction x
    e_perp, so that e_perp x e_par is the direction (Bohren & Huffman 1983, sec. 3.2); for
    incidence along z, e_perp = -e_phi and e_par = e_theta.
    """
    perp = np.cross(scattered, incident)
    perp = perp / np.linalg.norm(perp, axis=-1, keepdims=True)
    return perp, np.cross(incident, perp), np.cross(scattered, perp)
