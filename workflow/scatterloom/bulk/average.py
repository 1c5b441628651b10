"""Averages of the optical properties of a mixture over a size distribution.

Cross sections average by number, matrices and asymmetry parameters by scattering
cross section (Hansen & Travis 1974, section 2). Half widths are bounds that add up:

- errors of the table count as fully correlated over sizes, particles and elements
  (they come from the same lattices and do tend to share their sign), so they add
  linearly and never average out;
- the quadrature error is the larger change of the result when the even, or the odd, sizes
  are left out (one change alone may happen to be small). No element of a matrix has less
  than half the largest such error of any element at its angle, and the asymmetry parameter
  no less than its spread over sizes times half the relative one of the scattering cross
  section: a change that crosses zero somewhere is not small by merit;
- particles smaller or larger than the table are left out of the value. Their share
  of extinction is estimated from the ends of the table and its effect added in full.
  This is an estimate, not a bound: an average that needs it should not be trusted
  (it is flagged beyond a share of 1 %).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.bulk.weights import coarse_nodes, size_weights
from scatterloom.campaign.distribution import Distribution

FloatArray = NDArray[np.float64]

FEWEST_SIZES = 4
_LARGE_PARTICLE_EXTINCTION = 3.0  # between the first maximum (4) and the limit (2) of spheres


@dataclass(frozen=True)
class Optics:
    """One kind of particle at one wavelength, on the sizes that were solved.

    Attributes
    ----------
    radius_um : float64 (n_size,)
        Increasing radii [um].
    extinction, scattering, absorption : float64 (n_size,)
        Efficiencies; each has a companion `..._error` of half widths.
    asymmetry : float64 (n_size,)
        Asymmetry parameter, with `asymmetry_error`.
    matrix, matrix_error : float64 (n_size, n_angle, 4, 4)
        Scattering matrices (mean F11 of 1) and half widths.
    ratio_error : float64 (n_size, n_angle, 4, 4)
        Half widths of the elements over F11, narrower than those of both suggest; what
        stands for F11 itself is not used.
    """

    radius_um: FloatArray
    extinction: FloatArray
    extinction_error: FloatArray
    scattering: FloatArray
    scattering_error: FloatArray
    absorption: FloatArray
    absorption_error: FloatArray
    asymmetry: FloatArray
    asymmetry_error: FloatArray
    matrix: FloatArray
    matrix_error: FloatArray
    ratio_error: FloatArray


@dataclass(frozen=True)
class Average:
    """Properties of a population; `..._error` are half widths, 95 % each of their parts.

    Attributes
    ----------
    extinction_um2, scattering_um2, absorption_um2 : float
        Mean cross sections per particle [um2].
    albedo, asymmetry : float
        Single-scattering albedo and asymmetry parameter.
    matrix, matrix_error : float64 (n_angle, 4, 4)
        Scattering matrix (mean F11 of 1) and half width.
    ratio, ratio_error : float64 (n_angle, 4, 4)
        Elements divided by F11. Their half widths are smaller than those of elements
        suggest: what scales all elements alike leaves them unchanged.
    share_below, share_above : float
        Estimated share of the extinction by particles below and above the table's sizes.
    quadrature_error : float
        Largest relative change of the extinction when every other size is left out.
    """

    extinction_um2: float
    extinction_um2_error: float
    scattering_um2: float
    scattering_um2_error: float
    absorption_um2: float
    absorption_um2_error: float
    albedo: float
    albedo_error: float
    asymmetry: float
    asymmetry_error: float
    matrix: FloatArray
    matrix_error: FloatArray
    ratio: FloatArray
    ratio_error: FloatArray
    share_below: float
    share_above: float
    quadrature_error: float


@dataclass(frozen=True)
class _Part:
    """One kind of particle with its quadrature weights [um2] on all sizes, (n_size,), and on
    the two halves of them, (2, n_size)."""

    optics: Optics
    weight: FloatArray
    coarse: FloatArray
    tail_below_um2: float
    tail_above_um2: float


def population_average(
    mixture: Sequence[tuple[float, Optics]],
    distribution: Distribution | Sequence[Distribution],
) -> Average:
    """Average over the size distributions of a mixture.

    Parameters
    ----------
    mixture : sequence of (float, Optics)
        Number of particles of each kind (any scale) and their optics, on common angles.
    distribution : Distribution or sequence of Distribution
        Size distribution by number, of the radius of the sphere of equal volume: one for
        all kinds, or one for each.

    Returns
    -------
    Average

    Raises
    ------
    ValueError
        If a kind has fewer than `FEWEST_SIZES` sizes, or the numbers do not sum to
        something above zero.
    """
    total = math.fsum(number for number, _ in mixture)
    if not total > 0:
        raise ValueError("the numbers of particles must sum to something above zero")
    each = distribution if isinstance(distribution, Sequence) else [distribution] * len(mixture)
    parts = [
        _part(number / total, optics, own)
        for (number, optics), own in zip(mixture, each, strict=True)
    ]

    ext, ext_error, ext_coarse = _cross_section(
        parts, lambda o: o.extinction, lambda o: o.extinction_error
    )
    sca, sca_error, sca_coarse = _cross_section(
        parts, lambda o: o.scattering, lambda o: o.scattering_error
    )
    ab, ab_error, ab_coarse = _cross_section(
        parts, lambda o: o.absorption, lambda o: o.absorption_error
    )
    below = math.fsum(p.tail_below_um2 for p in parts)
    above = math.fsum(p.tail_above_um2 for p in parts)
    missing = below + above
    share = missing / (ext + missing)
    end_albedo = [
        o.scattering[i] / o.extinction[i] for o in (p.optics for p in parts) for i in (0, -1)
    ]

    albedo = sca / ext
    # Two bounds from the same errors: from scattering and extinction, or from absorption
    # and extinction; the second is far smaller where absorption is weak.
    by_scattering = (sca_error + albedo * ext_error) / ext
    by_absorption = (ab_error + (1.0 - albedo) * ext_error) / ext
    albedo_error = (
        min(by_scattering, by_absorption)
        + _largest(albedo - sca_coarse / ext_coarse)
        + 2.0 * share * max(1.0 - albedo, *(abs(end - albedo) for end in end_albedo))
    )
    asymmetry, asymmetry_error = _by_scattering(
        parts, sca, sca_coarse, share, lambda o: o.asymmetry, lambda o: o.asymmetry_error
    )
    matrix, matrix_error = _by_scattering(
        parts, sca, sca_coarse, share, lambda o: o.matrix, lambda o: o.matrix_error
    )
    ratio, ratio_error = _ratios(parts, matrix, sca, sca_coarse, share)
    end_absorption = max(1.0 - end for end in end_albedo)
    return Average(
        extinction_um2=ext,
        extinction_um2_error=ext_error + _largest(ext - ext_coarse) + missing,
        scattering_um2=sca,
        scattering_um2_error=sca_error + _largest(sca - sca_coarse) + missing * max(end_albedo),
        absorption_um2=ab,
        absorption_um2_error=ab_error + _largest(ab - ab_coarse) + missing * end_absorption,
        albedo=albedo,
        albedo_error=albedo_error,
        asymmetry=float(asymmetry),
        asymmetry_error=float(asymmetry_error),
        matrix=matrix,
        matrix_error=matrix_error,
        ratio=ratio,
        ratio_error=ratio_error,
        share_below=below / (ext + missing),
        share_above=above / (ext + missing),
        quadrature_error=_largest(ext - ext_coarse) / ext,
    )


def _part(number: float, optics: Optics, distribution: Distribution) -> _Part:
    radius = optics.radius_um
    if radius.size < FEWEST_SIZES:
        raise ValueError(f"a population needs {FEWEST_SIZES} solved sizes, found {radius.size}")
    scale = math.pi * number

    def weights(nodes: FloatArray) -> FloatArray:
        return scale * size_weights(
            nodes,
            distribution.density,
            distribution.log_width,
            power=2,
            breaks_um=distribution.breaks_um,
        )

    coarse = np.zeros((2, radius.size))
    for half, row in enumerate(coarse):
        keep = coarse_nodes(radius.size, half)
        row[keep] = weights(radius[keep])
    # Below the table an efficiency falls at least like r (absorption by small particles);
    # above it extinction stays near its last value or is that of large particles.
    first, last = float(radius[0]), float(radius[-1])
    small = optics.extinction[0] / first * distribution.moment(3)
    large = max(optics.extinction[-1], _LARGE_PARTICLE_EXTINCTION) * distribution.moment(2)
    return _Part(
        optics,
        weights(radius),
        coarse,
        scale * small * distribution.share_below(first, 3),
        scale * large * distribution.share_above(last, 2),
    )


def _largest(change: FloatArray) -> float:
    return float(np.abs(change).max())


def _cross_section(
    parts: Sequence[_Part],
    efficiency: Callable[[Optics], FloatArray],
    half_width: Callable[[Optics], FloatArray],
) -> tuple[float, float, FloatArray]:
    """Mean cross section, the half width from the table, and the values on half of the sizes."""
    value = math.fsum(float(p.weight @ efficiency(p.optics)) for p in parts)
    error = math.fsum(float(np.abs(p.weight) @ half_width(p.optics)) for p in parts)
    coarse = np.sum([p.coarse @ efficiency(p.optics) for p in parts], axis=0)
    return value, error, coarse


def _by_scattering(
    parts: Sequence[_Part],
    scattering: float,
    scattering_coarse: FloatArray,
    share: float,
    quantity: Callable[[Optics], FloatArray],
    half_width: Callable[[Optics], FloatArray],
) -> tuple[FloatArray, FloatArray]:
    """Mean of a quantity weighted by scattering cross section, and its half width."""

    def mean(weights: Sequence[FloatArray], norm: float) -> FloatArray:
        total = [
            np.tensordot(weight * p.optics.scattering, quantity(p.optics), axes=1)
            for p, weight in zip(parts, weights, strict=True)
        ]
        return np.asarray(sum(total) / norm)

    value = mean([p.weight for p in parts], scattering)
    error = np.zeros_like(value)
    for half, norm in enumerate(scattering_coarse):
        weights = [p.coarse[half] for p in parts]
        error = np.maximum(error, np.abs(value - mean(weights, float(norm))))
    if value.ndim:
        occurs = np.any([np.any(quantity(p.optics) != 0.0, axis=0) for p in parts], axis=0)
        least = 0.5 * error.max(axis=(-2, -1), keepdims=True)
    else:
        occurs = np.array(True)
        spread = max(float(np.abs(quantity(p.optics) - value).max()) for p in parts)
        least = np.array(0.5 * spread * _largest(1.0 - scattering_coarse / scattering))
    error = np.where(occurs, np.maximum(error, least), error)
    for p in parts:
        weight, q = np.abs(p.weight) / scattering, quantity(p.optics)
        # d(N/D) = [q_i error + (q - mean) error of the cross section] / D at each size.
        error += np.tensordot(weight * p.optics.scattering, half_width(p.optics), axes=1)
        error += np.tensordot(weight * p.optics.scattering_error, np.abs(q - value), axes=1)
    ends = np.max([_largest_near_ends(quantity(p.optics)) for p in parts], axis=0)
    error += share * (np.abs(value) + ends)
    return value, error


def _largest_near_ends(quantity: FloatArray) -> FloatArray:
    """Largest size of a quantity in the quarters of the sizes at both ends.

    It stands for the particles outside the table: the last size alone may happen to
    lie on a zero.
    """
    size, near = np.abs(quantity), max(1, len(quantity) // 4)
    return np.asarray(np.maximum(size[:near].max(axis=0), size[-near:].max(axis=0)))


def _ratios(
    parts: Sequence[_Part],
    matrix: FloatArray,
    scattering: float,
    scattering_coarse: FloatArray,
    share: float,
) -> tuple[FloatArray, FloatArray]:
    """Elements divided by F11, and their half widths.

    The ratio r makes the mean of F_ij - r F11 vanish; to first order its error is
    the error of that mean over F11. At a size whose own ratio is q, this term is
    (q - r) F11, so the errors of q and of F11 count, the latter only as far as the
    sizes differ. Particles outside the table have |F_ij| <= F11,
    so they move it by (1 + |r|) F11 at most, unless the element vanishes for all.
    """
    f11 = matrix[..., :1, :1]
    r = matrix / f11
    excess, error = _by_scattering(
        parts,
        scattering,
        scattering_coarse,
        0.0,
        lambda o: o.matrix - r * o.matrix[..., :1, :1],
        lambda o: (
            o.matrix[..., :1, :1] * o.ratio_error
            + np.abs(o.matrix / o.matrix[..., :1, :1] - r) * o.matrix_error[..., :1, :1]
        ),
    )
    outside = np.max([_largest_near_ends(p.optics.matrix[..., :1, :1]) for p in parts], axis=0)
    occurs = np.any([np.any(p.optics.matrix != 0.0, axis=(0, 1)) for p in parts], axis=0)
    bound = error + np.abs(excess) + share * np.where(occurs, (1.0 + np.abs(r)) * outside, 0.0)
    bound /= f11
    bound[..., 0, 0] = 0.0
    return r, bound
