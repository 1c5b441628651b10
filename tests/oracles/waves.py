"""Vector spherical waves built from scipy's harmonics and Bessel functions.

A separate construction: M = grad(j_n Y) x r / sqrt(n(n+1)) and N = curl M (Jackson 1998,
section 9.7) from `scipy.special.sph_harm_y`, whose Condon-Shortley sign is taken out.
"""

from __future__ import annotations

import numpy as np
from scipy.special import sph_harm_y, spherical_jn

MAGNETIC, ELECTRIC = 0, 1


def angles(points):
    x, y, z = np.asarray(points).T
    return np.linalg.norm(points, axis=1), np.arctan2(np.hypot(x, y), z), np.arctan2(y, x)


def unit_vectors(theta, phi):
    ct, st, cp, sp = np.cos(theta), np.sin(theta), np.cos(phi), np.sin(phi)
    radial = np.array([st * cp, st * sp, ct])
    polar = np.array([ct * cp, ct * sp, -st])
    return radial, polar, np.array([-sp, cp, 0 * sp])


def vector_harmonics(n, m, theta, phi):
    """Y, B and C of degree n and order m (phase of d^n_0m): (n_point,), (2, n_point) twice.

    B = r grad Y / sqrt(n(n+1)) and C = grad Y x r / sqrt(n(n+1)), components theta, phi.
    """
    sign = (-1.0) ** m
    y, slope = sph_harm_y(n, m, theta, phi, diff_n=1)
    gradient = sign * np.array([slope[..., 0], slope[..., 1] / np.sin(theta)])
    b = gradient / np.sqrt(n * (n + 1))
    return sign * y, b, np.array([b[1], -b[0]])


def complex_wave(kind, n, m, points):
    """Field (3, n_point) of one wave with azimuth exp(i m phi)."""
    r, theta, phi = angles(points)
    radial, polar, azimuthal = unit_vectors(theta, phi)
    y, b, c = vector_harmonics(n, m, theta, phi)
    j, derivative = spherical_jn(n, r), spherical_jn(n, r, derivative=True)
    if kind == MAGNETIC:
        return j * (c[0] * polar + c[1] * azimuthal)
    across = derivative + j / r
    return np.sqrt(n * (n + 1)) * j / r * y * radial + across * (b[0] * polar + b[1] * azimuthal)


def real_wave(kind, n, m, sine, points):
    """Field (3, n_point) with cos(m phi) or sin(m phi) in place of exp(i m phi).

    Azimuth enters B and the radial part by Y, C by its derivative; the real and imaginary
    part of the complex wave are exactly these, times sqrt 2 where m > 0.
    """
    field = complex_wave(kind, n, m, points)
    if m == 0:
        return field.real
    return np.sqrt(2.0) * (field.imag if sine else field.real)
