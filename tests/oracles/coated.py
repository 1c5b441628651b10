"""Coated sphere: the series of Aden & Kerker (1951) as in Bohren & Huffman 1983, sec. 8.1.

Time factor exp(-i w t): Im m > 0 absorbs. Efficiencies refer to the whole sphere's
geometric cross section. In Riccati-Bessel form; the tables of cases are small enough
(|m x| up to about 60) for the functions themselves, without recurrences of ratios.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import spherical_jn, spherical_yn

from oracles.mie import Sphere


def _psi(n: NDArray, z: complex) -> tuple[NDArray, NDArray]:
    """psi_n = z j_n(z) and its derivative."""
    j, dj = spherical_jn(n, z), spherical_jn(n, z, derivative=True)
    return z * j, j + z * dj


def _chi(n: NDArray, z: complex) -> tuple[NDArray, NDArray]:
    """chi_n = -z y_n(z) and its derivative."""
    y, dy = spherical_yn(n, z), spherical_yn(n, z, derivative=True)
    return -z * y, -y - z * dy


def coated_sphere(
    core_index: complex,
    shell_index: complex,
    core_size: float,
    size_parameter: float,
    n_max: int | None = None,
) -> Sphere:
    """Mie coefficients of a coated sphere (Bohren & Huffman 1983, eq. 8.2).

    Parameters
    ----------
    core_index, shell_index : complex
        Relative to the medium.
    core_size, size_parameter : float
        Size parameters of the core and of the whole sphere.
    n_max : int, optional
        The series ends at x + 6 x^(1/3) + 12 terms by default, as for a sphere, or earlier
        where a term falls below 1e-20: the functions grow beyond measure soon after.
    """
    m1, m2 = complex(core_index), complex(shell_index)
    x, y = core_size, size_parameter
    if n_max is None:
        n_max = int(np.ceil(y + 6 * np.cbrt(y) + 12))
    n = np.arange(1, n_max + 1)
    p1, dp1 = _psi(n, m1 * x)
    p2, dp2 = _psi(n, m2 * x)
    c2, dc2 = _chi(n, m2 * x)
    with np.errstate(invalid="ignore", over="ignore", divide="ignore"):
        electric = (m2 * p2 * dp1 - m1 * dp2 * p1) / (m2 * c2 * dp1 - m1 * dc2 * p1)
        magnetic = (m2 * p1 * dp2 - m1 * p2 * dp1) / (m2 * dc2 * p1 - m1 * dp1 * c2)
        q, dq = _psi(n, m2 * y)
        c, dc = _chi(n, m2 * y)
        outer, d_outer = _psi(n, y)
        far, d_far = _chi(n, y)
        xi, d_xi = outer - 1j * far, d_outer - 1j * d_far
        value, slope = q - electric * c, dq - electric * dc
        a = (outer * slope - m2 * d_outer * value) / (xi * slope - m2 * d_xi * value)
        value, slope = q - magnetic * c, dq - magnetic * dc
        b = (m2 * outer * slope - d_outer * value) / (m2 * xi * slope - d_xi * value)
    sound = np.isfinite(a) & np.isfinite(b) & (np.abs(a) + np.abs(b) > 1e-20)
    terms = len(n) if sound.all() else int(np.argmin(sound))
    return Sphere(m2, y, a[:terms], b[:terms])


def coated_polarizability(core_index: complex, shell_index: complex, radius_fraction: float):
    """Static polarizability over volume, times 4 pi (Bohren & Huffman 1983, eq. 5.36)."""
    e1, e2 = complex(core_index) ** 2, complex(shell_index) ** 2
    f = radius_fraction**3
    top = (e2 - 1) * (e1 + 2 * e2) + f * (e1 - e2) * (1 + 2 * e2)
    bottom = (e2 + 2) * (e1 + 2 * e2) + f * (2 * e2 - 2) * (e1 - e2)
    return 3 * top / bottom
