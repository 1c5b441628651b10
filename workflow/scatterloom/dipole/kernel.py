"""Filtered Green tensor on a cubic lattice and its transform, one octant kept.

Lengths are in units of 1/k (so the wavenumber is one) and the lattice spacing is
`kd`. Gaussian units, time factor exp(-i w t).
"""

from __future__ import annotations

from collections.abc import Iterator

import ducc0
import numpy as np
from numpy.typing import DTypeLike, NDArray
from scipy.special import sici


def radial_parts(distance: NDArray[np.float64], kd: float) -> tuple[NDArray, NDArray]:
    """Isotropic and radial part of the filtered Green tensor.

    The tensor is ``G(R) = iso I + rad R^R^`` with ``iso = g + g'/R`` and
    ``rad = g'' - g'/R``, where g is the outgoing scalar wave low-pass filtered at
    the lattice's Nyquist wavenumber pi/kd.

    Parameters
    ----------
    distance : float64 (n,) [1/k], all positive
    kd : float
        Lattice spacing times wavenumber, below pi.

    Returns
    -------
    iso, rad : complex128 (n,) [k^3]

    References
    ----------
    Piller & Martin 1998, IEEE Trans. Antennas Propag. 46, 1126;
    Gay-Balmaz & Martin 2002, Comput. Phys. Commun. 144, 111, eqs. 13-18.
    """
    r = np.asarray(distance, dtype=np.float64)
    cut = np.pi / kd
    si_plus, ci_plus = sici((cut + 1.0) * r)
    si_minus, ci_minus = sici((cut - 1.0) * r)
    a = 1j * np.pi + ci_minus - ci_plus
    b = si_plus + si_minus
    sin_r, cos_r = np.sin(r), np.cos(r)
    sin_c, cos_c = np.sin(cut * r), np.cos(cut * r)
    f0 = (sin_r * a + cos_r * b) / np.pi
    f1 = (cos_r * a - sin_r * b + 2.0 * sin_c / r) / np.pi
    f2 = -f0 + (2.0 * cut * cos_c / r - 2.0 * sin_c / r**2) / np.pi
    g = f0 / r
    g1 = f1 / r - f0 / r**2
    g2 = f2 / r - 2.0 * f1 / r**2 + 2.0 * f0 / r**3
    return g + g1 / r, g2 - g1 / r


def lag_components(lags: tuple[int, int, int], kd: float) -> Iterator[NDArray[np.complex128]]:
    """Components xx, yy, zz, xy, xz, yz of the Green tensor at every lag of one octant.

    Each is complex128 (lags[0], lags[1], lags[2]). The tensor at lag zero is zero: the self
    term lives in the polarizability.
    """
    i, j, k = (np.arange(n, dtype=np.int64) for n in lags)
    square = i[:, None, None] ** 2 + j[None, :, None] ** 2 + k[None, None, :] ** 2
    # Far fewer distances than lags: the sine and cosine integrals are the dear part.
    unique = np.flatnonzero(np.bincount(square.ravel()))
    iso = np.zeros(int(unique[-1]) + 1, dtype=np.complex128)
    rad = np.zeros_like(iso)
    far = unique[1:]
    iso[far], rad[far] = radial_parts(kd * np.sqrt(far.astype(np.float64)), kd)
    rad[far] /= far
    x, y, z = np.meshgrid(i, j, k, indexing="ij", sparse=True)
    for one, other in ((x, x), (y, y), (z, z), (x, y), (x, z), (y, z)):
        component = rad[square] * (one * other)
        if one is other:
            component += iso[square]
        yield component


# Axes along which each component (xx, yy, zz, xy, xz, yz) is odd in the lag.
_ODD_AXES: tuple[tuple[int, ...], ...] = ((), (), (), (0, 1), (0, 2), (1, 2))


def octant_spectrum(
    box: tuple[int, int, int],
    half: tuple[int, int, int],
    kd: float,
    dtype: DTypeLike = np.complex64,
) -> NDArray:
    """Transform of the Green tensor on the padded grid, one octant.

    Parameters
    ----------
    box : cells along x, y, z
    half : half the padded length on each axis, at least `box`
    kd : float
        Lattice spacing times wavenumber.

    Returns
    -------
    complex (half[0]+1, 6, half[1]+1, half[2]+1)
        Already divided by the padded grid's size. A component odd along an axis
        changes sign at the mirrored index and vanishes at index 0 and at Nyquist,
        as it must: the lag at Nyquist is never used.
    """
    if not 0.0 < kd < np.pi:
        raise ValueError(f"lattice spacing times wavenumber is {kd:.3g}, must be below pi")
    out: NDArray = np.empty((half[0] + 1, 6, half[1] + 1, half[2] + 1), dtype=dtype)
    scale = 1.0 / (8.0 * half[0] * half[1] * half[2])
    # One component at a time: all six in double precision are twice the result.
    for c, (component, odd) in enumerate(zip(lag_components(box, kd), _ODD_AXES, strict=True)):
        # A real symmetric sequence transforms to a cosine sum, an antisymmetric one
        # to -i times a sine sum; two odd axes make (-i)^2 = -1.
        parts = np.zeros((2, *(h + 1 for h in half)))
        parts[0, : box[0], : box[1], : box[2]] = component.real
        parts[1, : box[0], : box[1], : box[2]] = component.imag
        for axis in range(3):
            if axis in odd:
                inner = [slice(None)] * 4
                inner[axis + 1] = slice(1, half[axis])
                values = np.ascontiguousarray(parts[tuple(inner)])
                parts = np.zeros_like(parts)
                if values.size:  # an axis of one cell has no odd part
                    parts[tuple(inner)] = ducc0.fft.dst(values, 1, [axis + 1])
            else:
                parts = ducc0.fft.dct(parts, 1, [axis + 1])
        sign = -scale if odd else scale
        out.real[:, c] = sign * parts[0]
        out.imag[:, c] = sign * parts[1]
    return out
