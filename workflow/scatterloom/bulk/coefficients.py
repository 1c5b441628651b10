"""Expansion coefficients of matrices known on an angle grid, and their delta-M scaling.

Coefficients are those of `scatterloom.scattering.expansion`, named as usual: a1, a2, a3, a4
of elements 11, 22, 33, 44 and b1, b2 of elements 12 and 34. They are the coefficients of
Hovenier & van der Mee 1983 (Astron. Astrophys. 128, 1) in generalized spherical functions
P^l_mn = i^(n-m) d^l_mn, up to the sign convention of element 34: P^l_02 = -d^l_02, hence
the minus signs of b1 and b2 in d^l_02.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from scatterloom.campaign.populations import FEWEST_ANGLES
from scatterloom.scattering.expansion import synthesize, wigner_d
from scatterloom.scattering.quadrature import angle_weights

FloatArray = NDArray[np.float64]

NAMES = ("a1", "a2", "a3", "a4", "b1", "b2")
_PLACES = ((0, 0), (1, 1), (2, 2), (3, 3), (0, 1), (2, 3))
_PARTNERS = {"b1": ((1, 0), 1.0), "b2": ((3, 2), -1.0)}

TOLERANCE = 1e-5
"""Change of any element, relative to F11, that ends a series: far below any error bar."""


@dataclass(frozen=True)
class Series:
    """Coefficients of one scattering matrix.

    Attributes
    ----------
    coefficients, half_widths : float64 (l_max + 1, 6)
        Columns a1, a2, a3, a4, b1, b2, with a1_0 = 1; half widths are bounds: the errors
        of the matrix at all angles add up with the worst signs.
    truncation_error : float
        Largest difference of the summed series from the matrix at its angles, of any
        element, relative to F11.
    normalization_defect : float
        What the mean of F11 over the sphere differed from 1 by, before normalization.
    resolved : bool
        Whether the truncation error met `TOLERANCE`; if not, the angles are too coarse
        for the matrix.
    """

    coefficients: FloatArray
    half_widths: FloatArray
    truncation_error: float
    normalization_defect: float
    resolved: bool


def matrices_of(coefficients: ArrayLike) -> FloatArray:
    """Coefficients as (l_max + 1, 4, 4), for `synthesize`.

    Parameters
    ----------
    coefficients : float64 (l_max + 1, 6)
    """
    c = np.asarray(coefficients, dtype=np.float64)
    out = np.zeros((*c.shape[:-1], 4, 4))
    for column, (name, place) in enumerate(zip(NAMES, _PLACES, strict=True)):
        out[..., *place] = c[..., column]
        if name in _PARTNERS:
            partner, sign = _PARTNERS[name]
            out[..., *partner] = sign * c[..., column]
    return out


def evaluate(coefficients: ArrayLike, angles_deg: ArrayLike) -> FloatArray:
    """Scattering matrices (n_angle, 4, 4) from coefficients (l_max + 1, 6)."""
    return synthesize(matrices_of(coefficients), angles_deg)


def fit_series(
    matrix: FloatArray, half_width: FloatArray, angles_deg: FloatArray, tolerance: float = TOLERANCE
) -> Series:
    """Expand one scattering matrix of a mirror-symmetric ensemble.

    Weighted least squares on the angles, with the weights of a quadrature over the sphere:
    on an even grid that is the projection, exact for matrices of degree below half the
    number of angles. The degree is the lowest whose sum agrees with the matrix to
    `tolerance`.

    Parameters
    ----------
    matrix, half_width : float64 (n_angle, 4, 4)
    angles_deg : float64 (n_angle,) [deg]
        From 0 to 180.
    tolerance : float
        Relative to F11.

    Returns
    -------
    Series

    Raises
    ------
    ValueError
        If the angles do not run from 0 to 180 degrees, or are fewer than 8.
    """
    angles = np.asarray(angles_deg, dtype=np.float64)
    angle_weights(angles)  # raises unless they cover the sphere
    if angles.size < FEWEST_ANGLES:
        raise ValueError(f"an expansion needs {FEWEST_ANGLES} angles or more, found {angles.size}")
    # Structure of degree l is 180/l degrees wide; two angles must fall on each.
    top = int(min(180.0 / np.diff(angles).max(), angles.size - 1) / 2.0)
    resolver = _resolver(angles.tobytes(), top)
    full = resolver.solve(matrix)
    f11 = matrix[:, :1, :1]

    def apart(degree: int) -> float:
        return float((np.abs(evaluate(full[: degree + 1], angles) - matrix) / f11).max())

    degree = min(2, top)
    while degree < top and apart(degree) > tolerance:
        degree += 1
    truncation = apart(degree)
    kept, scale = full[: degree + 1], full[0, 0]
    return Series(
        kept / scale,
        resolver.bound(half_width)[: degree + 1] / scale,
        truncation,
        float(scale - 1.0),
        truncation <= tolerance,
    )


class _Resolver:
    """The linear maps from matrices at angles to coefficients up to a degree."""

    def __init__(self, angles: FloatArray, top: int) -> None:
        x, root = np.cos(np.deg2rad(angles)), np.sqrt(np.maximum(angle_weights(angles), 0.0))
        orders = {"d00": (0, 0), "d02": (0, 2), "d22": (2, 2), "d2m2": (2, -2)}
        self._maps = {}
        for name, (m, n) in orders.items():
            basis = wigner_d(m, n, top, x).T * (-1.0 if name == "d02" else 1.0)
            # Functions of order 2 vanish below degree 2; their rows come out as zeros.
            inverse = np.linalg.pinv(root[:, None] * basis, rcond=1e-12)
            self._maps[name] = np.asarray(inverse * root)

    def solve(self, f: FloatArray) -> FloatArray:
        same = self._maps["d22"] @ (f[:, 1, 1] + f[:, 2, 2])
        flip = self._maps["d2m2"] @ (f[:, 1, 1] - f[:, 2, 2])
        return np.stack(
            [
                self._maps["d00"] @ f[:, 0, 0],
                0.5 * (same + flip),
                0.5 * (same - flip),
                self._maps["d00"] @ f[:, 3, 3],
                self._maps["d02"] @ f[:, 0, 1],
                self._maps["d02"] @ f[:, 2, 3],
            ],
            axis=1,
        )

    def bound(self, e: FloatArray) -> FloatArray:
        size = {key: np.abs(value) for key, value in self._maps.items()}
        linear = 0.5 * (size["d22"] + size["d2m2"]) @ (e[:, 1, 1] + e[:, 2, 2])
        columns = [
            size["d00"] @ e[:, 0, 0],
            linear,
            linear,
            size["d00"] @ e[:, 3, 3],
            size["d02"] @ e[:, 0, 1],
            size["d02"] @ e[:, 2, 3],
        ]
        return np.stack(columns, axis=1)


@lru_cache(maxsize=4)
def _resolver(angles: bytes, top: int) -> _Resolver:
    """The maps for one grid, kept: every matrix of a campaign has the same angles."""
    return _Resolver(np.frombuffer(angles), top)


@dataclass(frozen=True)
class DeltaM:
    """A series scaled by delta-M, for a radiative transfer of `streams` streams.

    Attributes
    ----------
    streams : int
    forward_fraction : float
        f, the part of the scattering put into the direct beam.
    coefficients : float64 (streams, 6)
        Scaled, degrees 0 to streams - 1; a1_0 = 1.
    """

    streams: int
    forward_fraction: float
    coefficients: FloatArray

    def albedo(self, albedo: float) -> float:
        """Scaled single-scattering albedo, (1 - f) w / (1 - f w)."""
        f = self.forward_fraction
        return (1.0 - f) * albedo / (1.0 - f * albedo)

    def extinction(self, extinction: float, albedo: float) -> float:
        """Scaled extinction or optical thickness, (1 - f w) times the unscaled."""
        return (1.0 - self.forward_fraction * albedo) * extinction


def delta_m(coefficients: FloatArray, streams: int) -> DeltaM:
    """Scale a series by delta-M (Wiscombe 1977, J. Atmos. Sci. 34, 1408).

    f = a1_2M/(4M + 1) with 2M = `streams`, the first degree left out. The forward peak is
    taken as f times the unit matrix, whose coefficients are 2l + 1 for a1 and a4, the same
    for a2 and a3 from degree 2, and none for b1, b2; what remains is divided by 1 - f.

    Parameters
    ----------
    coefficients : float64 (l_max + 1, 6)
        a1_0 = 1.
    streams : int
        Even, 2 or more.

    Raises
    ------
    ValueError
        For an odd number of streams, or if f is 1 or more.
    """
    if streams < 2 or streams % 2:
        raise ValueError(f"the number of streams must be even and 2 or more, found {streams}")
    padded = np.zeros((max(len(coefficients), streams + 1), 6))
    padded[: len(coefficients)] = coefficients
    f = float(padded[streams, 0]) / (2 * streams + 1)
    if f >= 1.0:
        raise ValueError(f"a forward fraction of {f:g} leaves no scattering")
    degree = np.arange(streams)
    peak = np.zeros((streams, 6))
    peak[:, [0, 3]] = (2 * degree + 1)[:, None]
    peak[2:, 1:3] = (2 * degree[2:] + 1)[:, None]
    return DeltaM(streams, f, (padded[:streams] - f * peak) / (1.0 - f))
