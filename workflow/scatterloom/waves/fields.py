"""Fields of the real regular vector spherical waves at given points."""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.waves.basis import WaveBasis


@njit(cache=True)
def _spherical_bessel(n_max, r, out):  # type: ignore[no-untyped-def]
    """j_0..j_n_max at r > 0 by downward recurrence, normalized on sum (2n+1) j_n^2 = 1."""
    start = n_max + 16 + int(r) + int(math.sqrt(40.0 * (n_max + r)))
    above, here, norm = 0.0, 1e-150, 0.0
    for n in range(start, -1, -1):
        if n <= n_max:
            out[n] = here
        norm += (2 * n + 1) * here * here
        if n > 0:
            below = (2 * n + 1) / r * here - above
            above, here = here, below
            if abs(here) > 1e120:
                above *= 1e-240
                here *= 1e-240
                norm = norm * 1e-240 * 1e-240
                for k in range(n, n_max + 1):
                    out[k] *= 1e-240
    # The sign is fixed by whichever of j_0 = sin r / r and j_1 is not small.
    j0 = math.sin(r) / r
    scale = 1.0 / math.sqrt(norm)
    if abs(j0) > 0.05 / max(r, 1.0):
        if out[0] * j0 < 0.0:
            scale = -scale
    elif n_max >= 1:
        j1 = math.sin(r) / r**2 - math.cos(r) / r
        if out[1] * j1 < 0.0:
            scale = -scale
    for n in range(n_max + 1):
        out[n] *= scale


@njit(cache=True)
def _fields(points, n_max, out):  # type: ignore[no-untyped-def]
    """Fill out (n_wave, 3, n_point); the wave order is that of `wave_basis`."""
    bessel = np.empty(n_max + 1)
    polar = np.empty((n_max + 1, n_max + 2))  # d^n_{0m}
    over = np.empty((n_max + 1, n_max + 2))  # d^n_{0m} / sin(theta), m > 0
    for p in range(points.shape[0]):
        x, y, z = points[p, 0], points[p, 1], points[p, 2]
        rho = math.sqrt(x * x + y * y)
        r = max(math.sqrt(rho * rho + z * z), 1e-9)
        ct, st = z / r, rho / r
        if ct == 0.0 and st == 0.0:
            ct = 1.0  # the origin: any direction will do
        if rho > 0.0:
            cp, sp = x / rho, y / rho
        else:
            cp, sp = 1.0, 0.0
        _spherical_bessel(n_max, r, bessel)
        diagonal = 1.0  # d^m_{0m} / sin(theta)^m
        power = 1.0  # sin(theta)^(m-1)
        for m in range(1, n_max + 1):
            diagonal *= math.sqrt((2 * m - 1) / (2.0 * m))
            if m > 1:
                power *= st
            over[m, m] = diagonal * power
            for n in range(m + 1, n_max + 1):
                value = (2 * n - 1) * ct * over[n - 1, m]
                if n > m + 1:
                    value -= math.sqrt((n - 1.0 - m) * (n - 1 + m)) * over[n - 2, m]
                over[n, m] = value / math.sqrt((n - m) * (n + m))
            for n in range(m, n_max + 1):
                polar[n, m] = over[n, m] * st
        polar[0, 0] = 1.0
        for n in range(1, n_max + 1):
            value = (2 * n - 1) * ct * polar[n - 1, 0]
            if n > 1:
                value -= (n - 1) * polar[n - 2, 0]
            polar[n, 0] = value / n
        w = 0
        for n in range(1, n_max + 1):
            jn = bessel[n]
            slope = bessel[n - 1] - n * jn / r  # [r j_n]'/r
            scale = math.sqrt((2 * n + 1) / (4 * math.pi * n * (n + 1)))
            cm, sm = 1.0, 0.0
            for m in range(n + 1):
                if m == 0:
                    pi = 0.0
                    tau = -math.sqrt(n * (n + 1.0)) * polar[n, 1]
                    norm = scale
                else:
                    cm, sm = cm * cp - sm * sp, sm * cp + cm * sp
                    pi = m * over[n, m]
                    tau = n * ct * over[n, m]
                    if n > m:
                        tau -= math.sqrt((n - m) * (n + m + 0.0)) * over[n - 1, m]
                    norm = scale * math.sqrt(2.0)
                for kind in range(2):
                    for sine in range(2 if m > 0 else 1):
                        a = sm if sine else cm
                        b = cm if sine else -sm
                        b_theta, b_phi = norm * tau * a, norm * pi * b
                        if kind == 0:
                            e_r = 0.0
                            e_theta, e_phi = jn * b_phi, -jn * b_theta
                        else:
                            e_r = n * (n + 1) * jn / r * norm * polar[n, m] * a
                            e_theta, e_phi = slope * b_theta, slope * b_phi
                        radial = e_r * st + e_theta * ct
                        out[w, 0, p] = radial * cp - e_phi * sp
                        out[w, 1, p] = radial * sp + e_phi * cp
                        out[w, 2, p] = e_r * ct - e_theta * st
                        w += 1


def wave_fields(basis: WaveBasis, points: NDArray[np.float64]) -> NDArray[np.float64]:
    """Electric fields of all waves of the basis.

    RgM = j_n(r) C and RgN = n(n+1) j_n/r c d r^ + [r j_n]'/r B with the vector
    spherical harmonics B, C normalized over the sphere (Morse & Feshbach 1953,
    section 13.3), cosine and sine azimuth functions carrying a factor sqrt 2.

    Parameters
    ----------
    basis : WaveBasis
    points : float64 (n_point, 3) [1/k]

    Returns
    -------
    float64 (n_wave, 3, n_point)
        Cartesian components.
    """
    out = np.empty((len(basis), 3, len(points)))
    _fields(np.ascontiguousarray(points, dtype=np.float64), basis.n_max, out)
    return out
