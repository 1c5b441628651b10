"""Scattering matrices as series of generalized spherical functions.

A scattering matrix that depends on the scattering angle alone is written

    F_ij(theta) = sum_l c_l[i, j] * (a Wigner function d^l_mn(theta)),

where each entry of the circular-polarization form of the matrix has a Wigner
function of its own (Kuscer & Ribaric 1959, Opt. Acta 6, 42; de Haan, Bosma &
Hovenier 1987, Astron. Astrophys. 183, 371). A handful of coefficients then
holds the matrix at every angle, and the identities at 0 and 180 degrees and the
zero slope there hold by construction.

Conventions of the coefficient arrays, ``c`` of shape ``(..., l_max + 1, 4, 4)``
(rows and columns 0 to 3 stand for Stokes I, Q, U, V):

=========================  =============================================
elements                   series
=========================  =============================================
11, 14, 41, 44             ``F = sum c d00``          (c11 = a1, c44 = a4)
12, 13, 42, 43,
21, 31, 24, 34             ``F = - sum c d02``        (c12 = c21 = b1, c34 = b2)
22 + 33                    ``F22 + F33 = sum (c22 + c33) d22``   (c22 = a2, c33 = a3)
22 - 33                    ``F22 - F33 = sum (c22 - c33) d2,-2``
32 - 23                    ``F32 - F23 = sum (c32 - c23) d22``
32 + 23                    ``F32 + F23 = sum (c32 + c23) d2,-2``
=========================  =============================================

The minus sign holds for all eight d02 elements, so for a mirror-symmetric
ensemble c43 = -c34 = -b2. The factor 2l + 1 is part of the coefficients:
a1_0 = 1 when ``(1/2) int F11 sin(theta) dtheta = 1``, and g = a1_1 / 3.

The last four rows follow from writing the linear part of the Stokes vector as
z = (Q + iU)/2: a matrix takes it to
``z' = [F22 + F33 + i(F32 - F23)]/2 z + [F22 - F33 + i(F32 + F23)]/2 z*``, and the
first factor changes helicity by 2 -> 2, the second by -2 -> 2.
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]

_PAIRS = ((0, 0), (0, 2), (2, 2), (2, -2))
# Index arrays of the elements that share d00, and of those that share -d02.
_SCALAR = (np.array([0, 0, 3, 3]), np.array([0, 3, 0, 3]))
_MIXED = (np.array([0, 0, 3, 3, 1, 2, 1, 2]), np.array([1, 2, 1, 2, 0, 0, 3, 3]))


def wigner_d(m: int, n: int, l_max: int, cos_angle: ArrayLike) -> FloatArray:
    """Wigner functions d^l_mn for l = 0 .. l_max.

    Three-term upward recurrence in l, which is stable for these small orders
    (Varshalovich, Moskalev & Khersonskii 1988, section 4.8, eq. 14).

    Parameters
    ----------
    m, n : int
        One of (0, 0), (0, 2), (2, 2), (2, -2).
    l_max : int
        Largest degree, zero or more.
    cos_angle : float64 (n_angle,)
        Cosines of the angles.

    Returns
    -------
    float64 (l_max + 1, n_angle)
        Row l holds d^l_mn; rows below max(|m|, |n|) are zero. Signs are such that
        d^2_02 = (sqrt(6)/4) sin^2, d^2_22 = ((1 + cos)/2)^2, d^2_2,-2 = ((1 - cos)/2)^2.

    Raises
    ------
    ValueError
        For other orders or a negative degree.
    """
    if (m, n) not in _PAIRS:
        raise ValueError(f"orders (m, n) must be one of {_PAIRS}, found ({m}, {n})")
    if l_max < 0:
        raise ValueError(f"l_max must be zero or more, found {l_max}")
    x = np.atleast_1d(np.asarray(cos_angle, dtype=np.float64))
    d = np.zeros((l_max + 1, x.size))
    first = max(abs(m), abs(n))
    if l_max < first:
        return d
    if first == 0:
        d[0] = 1.0
        if l_max >= 1:
            d[1] = x
        start = 1
    else:
        if m == 0:
            d[2] = math.sqrt(6.0) / 4.0 * (1.0 - x) * (1.0 + x)
        else:
            d[2] = (0.5 * (1.0 + math.copysign(1.0, n) * x)) ** 2
        start = 2
    for degree in range(start, l_max):
        up = degree + 1
        ahead = degree * math.sqrt((up * up - m * m) * (up * up - n * n))
        behind = up * math.sqrt((degree * degree - m * m) * (degree * degree - n * n))
        middle = (2 * degree + 1) * (degree * up * x - m * n)
        d[up] = (middle * d[degree] - behind * d[degree - 1]) / ahead
    return d


@lru_cache(maxsize=64)
def _kept_wigner_d(m: int, n: int, l_max: int, cosines: bytes) -> FloatArray:
    """Wigner functions as (n_angle, l_max + 1), kept for the next case on the same angles.

    `cosines` are the bytes of the float64 cosines. Cases of a ladder come in order of size,
    so that a few degrees and two angle grids are in use at a time.
    """
    table = np.ascontiguousarray(wigner_d(m, n, l_max, np.frombuffer(cosines)).T)
    table.flags.writeable = False
    return table


def expand(
    matrix: ArrayLike, node_cos: ArrayLike, node_weight: ArrayLike, l_max: int | None = None
) -> FloatArray:
    """Coefficients of scattering matrices known at the nodes of a quadrature rule.

    Parameters
    ----------
    matrix : float64 (..., n_node, 4, 4)
        Scattering matrices at the nodes.
    node_cos, node_weight : float64 (n_node,)
        Cosines and weights of a rule on [-1, 1]; with Gauss-Legendre nodes the
        projection is exact for matrices of degree up to ``n_node - 1``.
    l_max : int, optional
        Largest degree kept, ``n_node - 1`` unless given.

    Returns
    -------
    float64 (..., l_max + 1, 4, 4)
        Coefficients in the conventions of this module.

    Raises
    ------
    ValueError
        If shapes disagree, or if more degrees are asked than the rule resolves.
    """
    f = np.asarray(matrix, dtype=np.float64)
    x = np.asarray(node_cos, dtype=np.float64)
    w = np.asarray(node_weight, dtype=np.float64)
    if x.ndim != 1 or w.shape != x.shape or f.shape[-3:] != (x.size, 4, 4):
        raise ValueError(
            "matrix must have shape (..., n_node, 4, 4) with n_node cosines and weights, "
            f"found {f.shape}, {x.shape} and {w.shape}"
        )
    top = x.size - 1 if l_max is None else l_max
    if not 0 <= top < x.size:
        raise ValueError(f"l_max must lie between 0 and n_node - 1 = {x.size - 1}, found {top}")
    norm = (2.0 * np.arange(top + 1)[:, None] + 1.0) / 2.0 * w
    d00, d02, d22, d2m2 = (norm * wigner_d(m, n, top, x) for m, n in _PAIRS)

    c = np.zeros((*f.shape[:-3], top + 1, 4, 4))
    c[..., *_SCALAR] = d00 @ f[..., *_SCALAR]
    c[..., *_MIXED] = -(d02 @ f[..., *_MIXED])
    same = d22 @ _stack(f[..., 1, 1] + f[..., 2, 2], f[..., 2, 1] - f[..., 1, 2])
    flip = d2m2 @ _stack(f[..., 1, 1] - f[..., 2, 2], f[..., 2, 1] + f[..., 1, 2])
    _fill_linear_block(c, same, flip)
    return c


def synthesize(coefficients: ArrayLike, angles_deg: ArrayLike) -> FloatArray:
    """Scattering matrices at any angles from their coefficients.

    Parameters
    ----------
    coefficients : float64 (..., l_max + 1, 4, 4)
        Coefficients in the conventions of this module.
    angles_deg : float64 (n_angle,)
        Scattering angles [deg].

    Returns
    -------
    float64 (..., n_angle, 4, 4)
        Scattering matrices.

    Raises
    ------
    ValueError
        If the coefficients do not end in two axes of length 4.
    """
    c = np.asarray(coefficients, dtype=np.float64)
    if c.ndim < 3 or c.shape[-2:] != (4, 4):
        raise ValueError(f"coefficients must have shape (..., l_max + 1, 4, 4), found {c.shape}")
    x = np.cos(np.deg2rad(np.atleast_1d(np.asarray(angles_deg, dtype=np.float64))))
    cosines = x.tobytes()
    d00, d02, d22, d2m2 = (_kept_wigner_d(m, n, c.shape[-3] - 1, cosines) for m, n in _PAIRS)

    f = np.zeros((*c.shape[:-3], x.size, 4, 4))
    f[..., *_SCALAR] = d00 @ c[..., *_SCALAR]
    f[..., *_MIXED] = -(d02 @ c[..., *_MIXED])
    same = d22 @ _stack(c[..., 1, 1] + c[..., 2, 2], c[..., 2, 1] - c[..., 1, 2])
    flip = d2m2 @ _stack(c[..., 1, 1] - c[..., 2, 2], c[..., 2, 1] + c[..., 1, 2])
    _fill_linear_block(f, same, flip)
    return f


def asymmetry_parameter(coefficients: ArrayLike) -> Any:
    """Mean cosine of the scattering angle, g = a1_1 / (3 a1_0).

    Parameters
    ----------
    coefficients : float64 (..., l_max + 1, 4, 4)
        Coefficients in the conventions of this module.

    Returns
    -------
    float64 (...)
        Asymmetry parameter; zero where the series stops at degree 0.
    """
    a1 = np.asarray(coefficients, dtype=np.float64)[..., 0, 0]
    if a1.shape[-1] < 2:
        return np.zeros(a1.shape[:-1])
    return a1[..., 1] / (3.0 * a1[..., 0])


def _stack(first: FloatArray, second: FloatArray) -> FloatArray:
    return np.stack([first, second], axis=-1)


def _fill_linear_block(out: FloatArray, same: FloatArray, flip: FloatArray) -> None:
    """Fill elements 22, 23, 32, 33 from their sums and differences (the map is its own inverse)."""
    out[..., 1, 1] = 0.5 * (same[..., 0] + flip[..., 0])
    out[..., 2, 2] = 0.5 * (same[..., 0] - flip[..., 0])
    out[..., 2, 1] = 0.5 * (flip[..., 1] + same[..., 1])
    out[..., 1, 2] = 0.5 * (flip[..., 1] - same[..., 1])
