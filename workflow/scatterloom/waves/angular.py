"""Polar functions of the vector spherical harmonics and plane-wave coefficients."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray


def polar_functions(
    n_max: int, cosine: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """pi = m d^n_{0m}/sin(theta) and tau = d(d^n_{0m})/d theta, normalized by c_n.

    ``c_n = sqrt((2n+1)/(4 pi n (n+1)))``; the poles are regular points.

    Parameters
    ----------
    n_max : int
    cosine : float64 (n_angle,)
        cos(theta), in [-1, 1].

    Returns
    -------
    pi, tau : float64 (n_max + 1, 2 n_max + 1, n_angle)
        Index n, then m + n_max; zero where |m| > n and for n = 0.
    """
    x = np.asarray(cosine, dtype=np.float64)
    sine = np.sqrt((1.0 - x) * (1.0 + x))
    over = np.zeros((n_max + 1, n_max + 2, x.size))
    pi = np.zeros((n_max + 1, 2 * n_max + 1, x.size))
    tau = np.zeros_like(pi)
    diagonal = np.ones_like(x)
    for m in range(1, n_max + 1):
        diagonal = diagonal * np.sqrt((2 * m - 1) / (2.0 * m)) * (sine if m > 1 else 1.0)
        over[m, m] = diagonal
        for n in range(m + 1, n_max + 1):
            value = (2 * n - 1) * x * over[n - 1, m]
            if n > m + 1:
                value = value - np.sqrt((n - 1.0 - m) * (n - 1 + m)) * over[n - 2, m]
            over[n, m] = value / np.sqrt((n - m) * (n + m))
    for n in range(1, n_max + 1):
        c = np.sqrt((2 * n + 1) / (4 * np.pi * n * (n + 1)))
        tau[n, n_max] = -c * np.sqrt(n * (n + 1.0)) * over[n, 1] * sine
        for m in range(1, n + 1):
            p = c * m * over[n, m]
            t = n * x * over[n, m]
            if n > m:
                t = t - np.sqrt((n - m) * (n + m + 0.0)) * over[n - 1, m]
            sign = -1.0 if m % 2 else 1.0
            pi[n, n_max + m], tau[n, n_max + m] = p, c * t
            pi[n, n_max - m], tau[n, n_max - m] = -sign * p, sign * c * t
    return pi, tau


@lru_cache(maxsize=128)
def _rotation_generator(n: int) -> tuple[NDArray[np.float64], NDArray[np.complex128]]:
    """Eigenvalues and eigenvectors of J_y for degree n, orders -n..n."""
    m = np.arange(-n, n)
    raising = np.diag(np.sqrt(n * (n + 1) - m * (m + 1.0)), -1)
    return np.linalg.eigh((raising - raising.T) / 2j)


def wigner_d(n: int, beta: NDArray[np.float64]) -> NDArray[np.float64]:
    """Wigner d^n_{m'm}(beta) in the phase of d^n_{0m} harmonics (no Condon-Shortley sign).

    Parameters
    ----------
    n : int
    beta : float64 (n_angle,) [rad]

    Returns
    -------
    float64 (n_angle, 2n+1, 2n+1), indices m' + n, m + n
    """
    value, vector = _rotation_generator(n)
    phase = np.exp(-1j * np.asarray(beta)[:, None] * np.round(value))
    standard = ((vector * phase[:, None, :]) @ vector.conj().T).real
    sign = (-1.0) ** np.arange(-n, n + 1)
    return standard * np.outer(sign, sign)


def axial_plane_wave(n_max: int) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Coefficients of a circularly polarized plane wave along +z.

    For E0 = (x + i s y)/sqrt 2, s = +1 or -1, only waves of order m = s occur.

    Returns
    -------
    magnetic, electric : complex128 (2, n_max + 1)
        Coefficients of RgM and RgN of order s; row 0 is s = +1, row 1 is s = -1.
        From a = 4 pi i^n C*(k).E0, b = 4 pi i^(n-1) B*(k).E0 in the limit theta -> 0.
    """
    n = np.arange(n_max + 1)
    h = np.sqrt((2 * n + 1) / (4 * np.pi)) / 2 * np.sqrt(2.0)
    a = 4 * np.pi * 1j**n * (-1j) * h
    b = 4 * np.pi * 1j ** (n - 1) * h
    a[0] = b[0] = 0.0
    return np.stack([a, a]), np.stack([b, -b])
