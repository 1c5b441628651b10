"""Population averages against closed forms and direct integration of the Mie series."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from oracles.mie import sphere
from scatterloom.bulk.average import Average, Optics, population_average
from scatterloom.campaign.distribution import Distribution, Gamma, Lognormal

ANGLES = np.array([0.0, 30.0, 90.0, 150.0, 180.0])
WAVENUMBER = 2 * math.pi / 0.55


def mie_optics(
    radius_um: np.ndarray, index: complex, half_width: float = 0.0, ratio_half_width: float = 0.0
) -> Optics:
    """Optics of spheres in vacuum at 0.55 um.

    Half widths of efficiencies and F11 are relative, those of ratios (of elements that
    occur) absolute; an element that is both off in scale and in its ratio has their sum.
    """
    spheres = [sphere(index, WAVENUMBER * r) for r in radius_um]
    ext = np.array([s.extinction_efficiency for s in spheres])
    sca = np.array([s.scattering_efficiency for s in spheres])
    g = np.array([s.asymmetry_parameter for s in spheres])
    matrix = np.stack([s.scattering_matrix(ANGLES) for s in spheres])
    ab = ext - sca
    ratio_error = ratio_half_width * (matrix != 0.0)
    ratio_error[..., 0, 0] = 0.0
    return Optics(
        radius_um,
        ext,
        half_width * ext,
        sca,
        half_width * sca,
        ab,
        half_width * ab,
        g,
        half_width * np.ones_like(g),
        matrix,
        half_width * np.abs(matrix) + ratio_error * matrix[..., :1, :1],
        ratio_error,
    )


def direct(distribution: Distribution, index: complex, low: float, high: float) -> dict:
    """Fine Gauss-Legendre integration of the Mie series over ln r, no interpolation."""
    node, weight = np.polynomial.legendre.leggauss(160)
    half = 0.5 * math.log(high / low)
    radius = low * np.exp(half * (1 + node))
    optics = mie_optics(radius, index)
    area = half * weight * distribution.density(radius) * math.pi * radius**2
    scattering = area @ optics.scattering
    by_scattering = area * optics.scattering / scattering
    return {
        "extinction": area @ optics.extinction,
        "scattering": scattering,
        "asymmetry": by_scattering @ optics.asymmetry,
        "matrix": np.tensordot(by_scattering, optics.matrix, axes=1),
    }


def test_rayleigh_population_in_closed_form() -> None:
    """Q = c r^4 and one matrix for all sizes: <C> = pi c <r^6>, matrix unchanged."""
    distribution = Lognormal(0.01, math.log(1.3))
    radius = np.geomspace(1e-3, 0.2, 120)
    c = np.cos(np.deg2rad(ANGLES))
    matrix = np.zeros((radius.size, ANGLES.size, 4, 4))
    matrix[:, :, 0, 0] = matrix[:, :, 1, 1] = 0.75 * (1 + c**2)
    matrix[:, :, 2, 2] = matrix[:, :, 3, 3] = 1.5 * c
    q = 1e4 * radius**4
    none = np.zeros_like(q)
    exact_matrix = np.zeros_like(matrix)
    optics = Optics(
        radius, q, 0.01 * q, q, 0.01 * q, none, none, none, none + 0.02,
        matrix, exact_matrix, exact_matrix,
    )  # fmt: skip
    result = population_average([(3.0, optics)], distribution)
    exact = math.pi * 1e4 * distribution.moment(6)
    assert result.extinction_um2 == pytest.approx(exact, rel=3e-5)  # cubic in ln r
    # A common relative error of 1 % stays 1 % (fully correlated over sizes).
    rest = result.extinction_um2_error - result.quadrature_error * exact
    assert rest == pytest.approx(0.01 * exact, rel=1e-2)
    np.testing.assert_allclose(result.matrix, matrix[0], atol=1e-12)
    assert result.albedo == pytest.approx(1.0, abs=1e-14)
    assert result.albedo_error < 1e-12
    assert result.asymmetry_error == pytest.approx(0.02, rel=1e-3)
    assert result.share_above < 1e-12


CASES = [
    (Lognormal(0.15, math.log(1.4)), 1.5 + 0.01j, 0.02, 1.0),
    (Gamma(0.3, 0.1), 1.33, 0.01, 1.5),
]


@pytest.mark.parametrize(("distribution", "index", "low", "high"), CASES)
def test_mie_population_against_direct_integration(distribution, index, low, high) -> None:
    radius = np.geomspace(low, high, 70)
    result = population_average([(1.0, mie_optics(radius, index))], distribution)
    exact = direct(distribution, index, low, high)
    # Ratio of radii 1.06 to 1.075: a cubic in ln r is good to about 1e-4 here.
    assert result.extinction_um2 == pytest.approx(exact["extinction"], rel=3e-4)
    assert abs(result.extinction_um2 - exact["extinction"]) < result.extinction_um2_error
    assert abs(result.scattering_um2 - exact["scattering"]) < result.scattering_um2_error
    assert abs(result.asymmetry - exact["asymmetry"]) < result.asymmetry_error
    assert np.all(np.abs(result.matrix - exact["matrix"]) <= result.matrix_error + 1e-13)
    np.testing.assert_allclose(result.matrix[:, 0, 0], exact["matrix"][:, 0, 0], rtol=2e-3)
    albedo = exact["scattering"] / exact["extinction"]
    assert abs(result.albedo - albedo) <= result.albedo_error + 1e-13


@pytest.mark.parametrize("index", [1.5 + 0.01j, 1.33, 1.75 + 0.4j])
@pytest.mark.parametrize(("low", "high"), [(0.02, 0.4), (0.12, 1.0), (0.1, 0.3)])
def test_truncated_table_is_covered_by_the_error(index, low, high) -> None:
    """A table that ends inside the distribution: error bars reach the whole distribution."""
    distribution = Lognormal(0.15, math.log(1.4))
    exact = direct(distribution, index, 0.01, 1.6)
    result = population_average(
        [(1.0, mie_optics(np.geomspace(low, high, 50), index))], distribution
    )
    # What lies outside is an estimate, not a bound: a tenth of it is granted.
    slack = 1.1
    lost = 1 - result.extinction_um2 / exact["extinction"]
    assert lost > 0.005
    assert abs(result.extinction_um2 - exact["extinction"]) < slack * result.extinction_um2_error
    albedo = exact["scattering"] / exact["extinction"]
    assert abs(result.albedo - albedo) <= slack * result.albedo_error + 1e-13
    assert abs(result.asymmetry - exact["asymmetry"]) < slack * result.asymmetry_error
    apart = np.abs(result.matrix - exact["matrix"])
    assert np.all(apart <= slack * result.matrix_error + 1e-13)
    ratio = exact["matrix"] / exact["matrix"][:, :1, :1]
    assert np.all(np.abs(result.ratio - ratio) <= result.ratio_error + 1e-13)
    share = result.share_below + result.share_above
    assert 0.7 * lost < share < 2 * lost


def test_mixture_is_the_weighted_sum_of_its_parts() -> None:
    distribution = Gamma(0.2, 0.1)
    radius = np.geomspace(0.01, 1.2, 60)
    dark, clear = mie_optics(radius, 1.5 + 0.1j), mie_optics(radius, 1.4)
    one = population_average([(1.0, dark)], distribution)
    two = population_average([(1.0, clear)], distribution)
    both = population_average([(1.5, dark), (0.5, clear)], distribution)
    ext = 0.75 * one.extinction_um2 + 0.25 * two.extinction_um2
    sca = 0.75 * one.scattering_um2 + 0.25 * two.scattering_um2
    matrix = (0.75 * one.scattering_um2 * one.matrix + 0.25 * two.scattering_um2 * two.matrix) / sca
    assert both.extinction_um2 == pytest.approx(ext, rel=1e-13)
    assert both.albedo == pytest.approx(sca / ext, rel=1e-13)
    np.testing.assert_allclose(both.matrix, matrix, atol=1e-12)
    assert both.absorption_um2 == pytest.approx(ext - sca, rel=1e-10)


def test_errors_of_the_table_pass_into_the_average() -> None:
    """Moving every efficiency, F11 and ratio by its half width stays within the bars."""
    distribution = Gamma(0.2, 0.1)
    radius = np.geomspace(0.01, 1.2, 60)
    base = mie_optics(radius, 1.5 + 0.05j, 0.02, 0.004)
    result = population_average([(1.0, base)], distribution)

    def moved(sign: np.ndarray, ratio_sign: np.ndarray) -> Average:
        up, turn = sign[:, None, None, None], ratio_sign[:, None, None, None]
        f11 = base.matrix[..., :1, :1]
        shifted = Optics(
            radius,
            base.extinction + sign * base.extinction_error,
            base.extinction_error,
            base.scattering + sign * base.scattering_error,
            base.scattering_error,
            base.absorption + sign * base.absorption_error,
            base.absorption_error,
            base.asymmetry - sign * base.asymmetry_error,
            base.asymmetry_error,
            (1.0 + 0.02 * up) * (base.matrix + turn * base.ratio_error * f11),
            base.matrix_error,
            base.ratio_error,
        )
        return population_average([(1.0, shifted)], distribution)

    patterns = [np.ones(60), -np.ones(60), np.where(radius > 0.25, 1.0, -1.0)]
    for sign, ratio_sign in itertools.product(patterns, repeat=2):
        other = moved(sign, ratio_sign)
        assert abs(other.extinction_um2 - result.extinction_um2) < result.extinction_um2_error
        assert abs(other.asymmetry - result.asymmetry) < result.asymmetry_error * 1.01
        assert abs(other.albedo - result.albedo) < result.albedo_error
        assert np.all(np.abs(other.matrix - result.matrix) < 1.03 * result.matrix_error + 1e-12)
        assert np.all(np.abs(other.ratio - result.ratio) < 1.03 * result.ratio_error + 1e-12)
    # F22 = F11 for spheres of all sizes: a common scale cancels, their own errors do not.
    np.testing.assert_allclose(result.ratio_error[:, 1, 1], 0.004, rtol=1e-3)
    # What the errors of both elements alone would allow is far wider.
    assert result.matrix_error[2, 1, 1] / result.matrix[2, 0, 0] > 0.02


def test_too_few_sizes_and_empty_mixtures_are_refused() -> None:
    few = mie_optics(np.array([0.1, 0.2, 0.3]), 1.4)
    with pytest.raises(ValueError, match="solved sizes"):
        population_average([(1.0, few)], Gamma(0.2, 0.1))
    with pytest.raises(ValueError, match="above zero"):
        population_average([], Gamma(0.2, 0.1))
