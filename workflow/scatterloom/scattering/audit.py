"""Physical identities that a scattering matrix and its efficiencies must meet.

Every check returns a deviation in units of the error bar: the size of the
violation divided by the half width of the expression that should vanish. That
half width is the sum of the half widths of its terms (a bound, whatever their
correlation) plus a floor for rounding. A deviation above 1 says that the error
bar does not cover a violation which is known to be an error. NaN says that the
check could not be made (the angle grid lacks 0 or 180 degrees, say), which is
reported as such and never as a pass.

Sources of the identities (citations from memory): van de Hulst 1957, chapter 5, and
Hu, Kattawar, Parkin & Herb 1987 (Appl. Opt. 26, 4159) for 0 and 180 degrees;
Mishchenko & Hovenier 1995 (Opt. Lett. 20, 1356) for F44 = F11 - 2 F22 at 180
degrees; Cloude 1986 (Optik 75, 26) for the eigenvalues.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from scatterloom.scattering.quadrature import angle_integral

FloatArray = NDArray[np.float64]

ROUNDING = 1e-10
"""Allowance for rounding in sums of about a hundred terms, relative to F11 or Qext."""

SLOPE_ANGLES = 5
"""Angles from either end that the check of slopes uses."""

_SIX = ((0, 0), (1, 1), (2, 2), (3, 3), (0, 1), (2, 3))
_EIGHT_ZERO = ((0, 2), (0, 3), (1, 2), (1, 3), (2, 0), (2, 1), (3, 0), (3, 1))


@dataclass(frozen=True)
class Check:
    """A named identity and what it says."""

    name: str
    statement: str


MATRIX_CHECKS = (
    Check("forward_f22_f33", "F22 = F33 at 0 deg"),
    Check("forward_f12", "F12 = 0 at 0 deg"),
    Check("forward_f34", "F34 = 0 at 0 deg"),
    Check("backward_f22_f33", "F33 = -F22 at 180 deg"),
    Check("backward_f12", "F12 = 0 at 180 deg"),
    Check("backward_f34", "F34 = 0 at 180 deg"),
    Check("backward_f44", "F44 = F11 - 2 F22 at 180 deg"),
    Check("forward_slope", "zero slope in angle at 0 deg"),
    Check("backward_slope", "zero slope in angle at 180 deg"),
    Check("six_elements", "six-element structure of a mirror-symmetric ensemble"),
    Check("eigenvalues", "no negative eigenvalue of the coherency matrix"),
    Check("normalization", "mean F11 over the sphere is 1"),
    Check("asymmetry", "asymmetry parameter is the mean cosine of F11"),
)
ENERGY_CHECKS = (
    Check("energy_balance", "Qext = Qsca + Qabs"),
    Check("albedo", "single-scattering albedo is Qsca/Qext and at most 1"),
    Check("absorption_sign", "Qabs is not negative"),
    Check("lossless", "Qabs = 0 where the index is real"),
)
CHECKS = MATRIX_CHECKS + ENERGY_CHECKS
STATEMENTS = {check.name: check.statement for check in CHECKS}


def audit_matrix(
    matrix: ArrayLike,
    half_width: ArrayLike,
    angles_deg: ArrayLike,
    asymmetry: ArrayLike = np.nan,
    asymmetry_half_width: ArrayLike = np.nan,
) -> dict[str, FloatArray]:
    """Deviations of scattering matrices from every identity in `MATRIX_CHECKS`.

    Parameters
    ----------
    matrix, half_width : float64 (..., n_angle, 4, 4)
        Matrices (mean F11 of 1) and the half widths (95 %) of their elements; a
        matrix that is NaN yields NaN deviations.
    angles_deg : float64 (n_angle,)
        Scattering angles [deg], increasing.
    asymmetry, asymmetry_half_width : float64 (...), optional
        Asymmetry parameters to compare with the matrices; without them that check
        is NaN.

    Returns
    -------
    dict of str to float64 (...)
        Deviation in units of the error bar, by name of check.

    Raises
    ------
    ValueError
        If shapes disagree.
    """
    f = np.asarray(matrix, dtype=np.float64)
    h = np.asarray(half_width, dtype=np.float64)
    angles = np.asarray(angles_deg, dtype=np.float64)
    if f.shape != h.shape or f.shape[-3:] != (angles.size, 4, 4):
        raise ValueError(
            "matrix and half_width must both have shape (..., n_angle, 4, 4), "
            f"found {f.shape}, {h.shape} and {angles.size} angles"
        )
    h = h + ROUNDING * np.abs(f[..., :1, :1])
    lead = f.shape[:-3]
    unknown = np.full(lead, np.nan)
    out = {check.name: unknown for check in MATRIX_CHECKS}

    if angles[0] == 0.0:
        a, b = f[..., 0, :, :], h[..., 0, :, :]
        out["forward_f22_f33"] = _scaled(a[..., 1, 1] - a[..., 2, 2], b[..., 1, 1] + b[..., 2, 2])
        out["forward_f12"] = _scaled(a[..., 0, 1], b[..., 0, 1])
        out["forward_f34"] = _scaled(a[..., 2, 3], b[..., 2, 3])
        if angles.size >= SLOPE_ANGLES:
            out["forward_slope"] = _slope(
                f[..., :SLOPE_ANGLES, :, :], h[..., :SLOPE_ANGLES, :, :], angles[:SLOPE_ANGLES]
            )
    if angles[-1] == 180.0:
        a, b = f[..., -1, :, :], h[..., -1, :, :]
        out["backward_f22_f33"] = _scaled(a[..., 1, 1] + a[..., 2, 2], b[..., 1, 1] + b[..., 2, 2])
        out["backward_f12"] = _scaled(a[..., 0, 1], b[..., 0, 1])
        out["backward_f34"] = _scaled(a[..., 2, 3], b[..., 2, 3])
        out["backward_f44"] = _scaled(
            a[..., 3, 3] - a[..., 0, 0] + 2 * a[..., 1, 1],
            b[..., 3, 3] + b[..., 0, 0] + 2 * b[..., 1, 1],
        )
        if angles.size >= SLOPE_ANGLES:
            last = slice(None, -SLOPE_ANGLES - 1, -1)
            out["backward_slope"] = _slope(
                f[..., last, :, :], h[..., last, :, :], 180.0 - angles[last]
            )
    out["six_elements"] = _six_elements(f, h)
    out["eigenvalues"] = _eigenvalues(f, h)
    if angles.size >= 5 and angles[0] == 0.0 and angles[-1] == 180.0:
        f11, h11 = f[..., 0, 0], h[..., 0, 0]
        cosine = np.cos(np.deg2rad(angles))
        mean, slack = angle_integral(f11, angles)
        width, _ = angle_integral(h11, angles)
        out["normalization"] = _scaled(0.5 * mean - 1.0, 0.5 * (width + slack))
        mean, slack = angle_integral(f11 * cosine, angles)
        width, _ = angle_integral(h11 * np.abs(cosine), angles)
        out["asymmetry"] = _scaled(
            0.5 * mean - np.asarray(asymmetry),
            0.5 * (width + slack) + np.asarray(asymmetry_half_width),
        )
    return out


def audit_energy(
    values: Mapping[str, ArrayLike], half_widths: Mapping[str, ArrayLike], absorbing: ArrayLike
) -> dict[str, FloatArray]:
    """Deviations of efficiencies from every identity in `ENERGY_CHECKS`.

    Parameters
    ----------
    values, half_widths : mapping of str to float64 (...)
        ``extinction_efficiency``, ``scattering_efficiency``, ``absorption_efficiency``
        and ``single_scattering_albedo``.
    absorbing : bool (...)
        Whether the imaginary part of the index is above zero; the check `lossless`
        is NaN there.

    Returns
    -------
    dict of str to float64 (...)
        Deviation in units of the error bar, by name of check.
    """
    ext, sca, ab, albedo = (np.asarray(values[name], dtype=np.float64) for name in _ENERGY)
    h_ext, h_sca, h_ab, h_albedo = (
        np.asarray(half_widths[name], dtype=np.float64) for name in _ENERGY
    )
    floor = ROUNDING * np.abs(ext)
    known = ext + sca + ab + albedo  # NaN where any is missing
    off_quotient = np.abs(albedo - sca / ext) / (h_albedo + h_sca / np.abs(ext) + ROUNDING)
    above_one = np.maximum(albedo - 1.0, 0.0) / (h_albedo + ROUNDING)
    return {
        "energy_balance": _scaled(ext - sca - ab, h_ext + h_sca + h_ab + floor),
        "albedo": np.where(np.isnan(known), np.nan, np.maximum(off_quotient, above_one)),
        "absorption_sign": _scaled(np.minimum(ab, 0.0), h_ab + floor),
        "lossless": np.where(np.asarray(absorbing), np.nan, _scaled(ab, h_ab + floor)),
    }


_ENERGY = (
    "extinction_efficiency",
    "scattering_efficiency",
    "absorption_efficiency",
    "single_scattering_albedo",
)


def _scaled(violation: FloatArray, half_width: FloatArray) -> FloatArray:
    return np.abs(violation) / half_width


def _slope(f: FloatArray, h: FloatArray, distance_deg: FloatArray) -> FloatArray:
    """Largest slope among the six elements, as change over the first step of angle.

    The slope is that of ``a + s t + b t^2 + c t^4 + d t^6`` through five angles: an
    even function has s = 0 up to eighth order. The changes from leaving out the
    fourth- and sixth-order terms are granted as truncation error, so that a grid too
    coarse for the oscillations of a large particle flags nothing. The unit is the
    largest half width at these angles: errors vary smoothly with angle, so that adding
    up the bars of neighbouring angles would blunt the check.
    """
    t = np.deg2rad(distance_deg)
    rules = []
    for powers in ((0, 1, 2), (0, 1, 2, 4), (0, 1, 2, 4, 6)):
        count = len(powers)
        rule = np.zeros(t.size)
        rule[:count] = np.linalg.inv(np.stack([t[:count] ** p for p in powers], axis=1))[1] * t[1]
        rules.append(rule)
    low, middle, high = rules
    worst = np.zeros(f.shape[:-3])
    for row, col in _SIX:
        element = f[..., row, col]
        truncation = np.abs(element @ (high - middle)) + np.abs(element @ (middle - low))
        unit = h[..., row, col].max(axis=-1)
        worst = np.maximum(worst, np.abs(element @ high) / (unit + truncation))
    return worst


def _six_elements(f: FloatArray, h: FloatArray) -> FloatArray:
    pairs: list[FloatArray] = [
        np.abs(f[..., row, col]) / h[..., row, col] for row, col in _EIGHT_ZERO
    ]
    pairs.append(np.abs(f[..., 0, 1] - f[..., 1, 0]) / (h[..., 0, 1] + h[..., 1, 0]))
    pairs.append(np.abs(f[..., 2, 3] + f[..., 3, 2]) / (h[..., 2, 3] + h[..., 3, 2]))
    worst = pairs[0]
    for pair in pairs[1:]:
        worst = np.maximum(worst, pair)
    return worst.max(axis=-1)


def coherency_eigenvalue(matrix: ArrayLike) -> FloatArray:
    """Smallest eigenvalue of the coherency matrix of Mueller matrices (Cloude 1986).

    Parameters
    ----------
    matrix : float64 (..., 4, 4)
        Mueller matrices.

    Returns
    -------
    float64 (...)
        A sum of physical (Jones) matrices has none below zero.
    """
    f = np.asarray(matrix, dtype=np.float64)
    rest = np.abs(f[..., 0, 1] - f[..., 1, 0]) + np.abs(f[..., 2, 3] + f[..., 3, 2])
    for row, col in _EIGHT_ZERO:
        rest = rest + np.abs(f[..., row, col])
    known = np.isfinite(f).all(axis=(-2, -1))
    if np.all(rest[known] <= ROUNDING * np.abs(f[..., 0, 0][known])):
        return _six_element_eigenvalue(f)
    coherency = 0.25 * np.einsum("...ij,ijab->...ab", np.where(np.isnan(f), 0.0, f), _PAULI)
    return np.where(known, np.linalg.eigvalsh(coherency)[..., 0], np.nan)


def _six_element_eigenvalue(f: FloatArray) -> FloatArray:
    f11, f22, f33, f44 = (f[..., i, i] for i in range(4))
    root = np.sqrt(4 * f[..., 0, 1] ** 2 + (f33 + f44) ** 2 + 4 * f[..., 2, 3] ** 2)
    return 0.25 * np.minimum(f11 + f22 - root, f11 - f22 - np.abs(f33 - f44))


def _pauli_products() -> NDArray[np.complex128]:
    """Products sigma_i x conj(sigma_j), shape (4, 4, 4, 4), in the order I, Q, U, V."""
    sigma = np.array(
        [
            [[1, 0], [0, 1]],
            [[1, 0], [0, -1]],
            [[0, 1], [1, 0]],
            [[0, -1j], [1j, 0]],
        ]
    )
    return np.einsum("iab,jcd->ijacbd", sigma, sigma.conj()).reshape(4, 4, 4, 4)


_PAULI = _pauli_products()


def _eigenvalues(f: FloatArray, h: FloatArray) -> FloatArray:
    # A perturbation moves an eigenvalue by no more than its Frobenius norm (Weyl);
    # the products of Pauli matrices are orthogonal, which gives the factor 1/2.
    bound = 0.5 * np.sqrt((h**2).sum(axis=(-2, -1)))
    return (np.maximum(-coherency_eigenvalue(f), 0.0) / bound).max(axis=-1)
