"""Two equal spheres on the z axis by superposition of multipoles.

Each sphere scatters what comes from outside and from the other one; waves of one sphere are
expanded about the other by projecting their fields on a sphere numerically, not by addition
coefficients. (The method: Bruning & Lo 1971, IEEE Trans. Antennas Propag. 19, 378, from memory.)
"""

from __future__ import annotations

import numpy as np
from scipy.special import spherical_jn, spherical_yn

from oracles.waves import ELECTRIC, MAGNETIC, angles, unit_vectors, vector_harmonics


def _radial(n, r, outgoing):
    j, slope = spherical_jn(n, r), spherical_jn(n, r, derivative=True)
    if not outgoing:
        return j + 0j, slope + 0j
    return j + 1j * spherical_yn(n, r), slope + 1j * spherical_yn(n, r, derivative=True)


def wave(kind, n, m, points, outgoing):
    """Field (3, n_point) of one wave about the origin, orthonormal over directions."""
    r, theta, phi = angles(points)
    radial, polar, azimuthal = unit_vectors(theta, phi)
    y, b, c = vector_harmonics(n, m, theta, phi)
    z, slope = _radial(n, r, outgoing)
    if kind == MAGNETIC:
        return z * (c[0] * polar + c[1] * azimuthal)
    across = slope + z / r
    return np.sqrt(n * (n + 1)) * z / r * y * radial + across * (b[0] * polar + b[1] * azimuthal)


def labels(m, n_max):
    """Kind and degree of the waves of order m."""
    return [(kind, n) for kind in (MAGNETIC, ELECTRIC) for n in range(max(1, abs(m)), n_max + 1)]


def translation(m, height, n_to, n_from, radius, outgoing):
    """Regular waves about the origin (rows) in waves about z = height (columns).

    The fields are projected on a sphere of this radius; all of them turn with exp(i m phi), so
    the meridian phi = 0 is enough.
    """
    cosine, weight = np.polynomial.legendre.leggauss(60)
    theta = np.arccos(cosine)
    polar = radius * np.stack([np.sin(theta), 0 * theta, np.cos(theta)], axis=1)
    radial, along, azimuthal = unit_vectors(theta, 0 * theta)
    rows, columns = labels(m, n_to), labels(m, n_from)
    out = np.empty((len(rows), len(columns)), dtype=complex)
    for column, (kind, n) in enumerate(columns):
        field = wave(kind, n, m, polar - [0, 0, height], outgoing)
        for row, (other, degree) in enumerate(rows):
            y, _, c = vector_harmonics(degree, m, theta, 0 * theta)
            j = spherical_jn(degree, radius)
            if other == MAGNETIC:
                shape, size = c[0] * along + c[1] * azimuthal, j
            else:
                shape, size = y * radial, np.sqrt(degree * (degree + 1)) * j / radius
            overlap = np.sum(np.conj(shape) * field, axis=0)
            out[row, column] = 2 * np.pi * weight @ overlap / size
    return out


def sphere_coefficients(index, x, n):
    """-b_n and -a_n (Bohren & Huffman 1983, eq. 4.53, relative permeability 1)."""
    inner, slope = spherical_jn(n, index * x), spherical_jn(n, index * x, derivative=True)
    psi_in = inner + index * x * slope  # derivative of z j(z) at z = m x
    result = []
    for square in (1.0, index**2):
        parts = []
        for outgoing in (False, True):
            z, dz = _radial(n, x, outgoing)
            parts.append(square * inner * (z + x * dz) - z * psi_in)
        result.append(-parts[0] / parts[1])
    return result


def pair(index, x, n_max, n_sphere):
    """Transition matrices of two touching spheres about their contact, one for each order m.

    Parameters
    ----------
    index : complex
    x : float
        Size parameter of each sphere.
    n_max, n_sphere : int
        Degrees about the contact and about each sphere.

    Returns
    -------
    dict of int to complex128 (n_wave, n_wave)
        For m = 0 and above; those of -m have the same singular values.
    """
    found = {}
    single = [sphere_coefficients(index, x, n) for n in range(1, n_sphere + 1)]
    for m in range(n_max + 1):
        own = labels(m, n_sphere)
        t = np.array([single[n - 1][kind] for kind, n in own])
        couple = [translation(m, s * 2 * x, n_sphere, n_sphere, x, True) for s in (-1, 1)]
        incoming = [translation(m, -s * x, n_sphere, n_max, x, False) for s in (1, -1)]
        leaving = [translation(m, s * x, n_max, n_sphere, x, False) for s in (1, -1)]
        one = np.eye(len(own))
        system = np.block([[one, -t[:, None] * couple[0]], [-t[:, None] * couple[1], one]])
        driven = np.concatenate([t[:, None] * part for part in incoming])
        found[m] = np.concatenate(leaving, axis=1) @ np.linalg.solve(system, driven)
    return found


def efficiencies(blocks, x):
    """Extinction and scattering, random orientation, over the area of the equal-volume sphere."""
    weight = {m: 1.0 if m == 0 else 2.0 for m in blocks}
    extinction = -sum(weight[m] * np.trace(t).real for m, t in blocks.items())
    scattering = sum(weight[m] * np.sum(np.abs(t) ** 2) for m, t in blocks.items())
    # C = 2 pi / k^2 times the sums, over pi r^2
    scale = 2.0 / (x * 2 ** (1 / 3)) ** 2
    return float(scale * extinction), float(scale * scattering)
