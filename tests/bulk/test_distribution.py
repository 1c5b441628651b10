"""Size distributions and quadrature weights against closed forms and direct integration."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import gamma as scipy_gamma
from scipy.stats import lognorm

from scatterloom.bulk.distribution import Gamma, Lognormal, from_spec
from scatterloom.bulk.weights import coarse_nodes, size_weights

DISTRIBUTIONS = [Lognormal(0.15, math.log(1.6)), Gamma(0.4, 0.12), Lognormal(1.0, 0.05)]


@pytest.mark.parametrize("distribution", DISTRIBUTIONS, ids=repr)
def test_moments_and_shares_against_direct_integration(distribution) -> None:
    peak = math.log(distribution.effective_radius_um)
    low, high = peak - 14 * distribution.log_width - 3, peak + 14 * distribution.log_width

    def integral(order: float, start: float, stop: float) -> float:
        def integrand(u: float) -> float:
            return float(distribution.density(math.exp(u))) * math.exp(order * u)

        middle = min(max(peak, start), stop)
        return (
            quad(integrand, start, middle, epsabs=0, epsrel=1e-11, limit=300)[0]
            + quad(integrand, middle, stop, epsabs=0, epsrel=1e-11, limit=300)[0]
        )

    for order in (0, 1, 2, 3):
        whole = integral(order, low, high)
        assert distribution.moment(order) == pytest.approx(whole, rel=1e-8)
        radius = 0.9 * distribution.effective_radius_um
        below = integral(order, low, math.log(radius))
        assert distribution.share_below(radius, order) == pytest.approx(below / whole, rel=1e-7)
        above = distribution.share_above(radius, order)
        assert above + distribution.share_below(radius, order) == pytest.approx(1, abs=1e-14)


@pytest.mark.parametrize("distribution", DISTRIBUTIONS, ids=repr)
def test_effective_radius_and_variance_are_those_of_hansen_and_travis(distribution) -> None:
    m2, m3, m4 = (distribution.moment(order) for order in (2, 3, 4))
    assert distribution.effective_radius_um == pytest.approx(m3 / m2, rel=1e-12)
    assert distribution.effective_variance == pytest.approx(m4 * m2 / m3**2 - 1, rel=1e-9)


def test_densities_are_those_of_scipy() -> None:
    r = np.geomspace(0.02, 2.0, 25)
    expected = r * lognorm.pdf(r, math.log(1.6), scale=0.15)
    np.testing.assert_allclose(DISTRIBUTIONS[0].density(r), expected, rtol=1e-12)
    expected = r * scipy_gamma.pdf(r, (1 - 0.24) / 0.12, scale=0.4 * 0.12)
    np.testing.assert_allclose(DISTRIBUTIONS[1].density(r), expected, rtol=1e-12)


def test_both_descriptions_of_a_lognormal_agree() -> None:
    first = from_spec({"kind": "lognormal", "radius_um": 0.15, "geometric_sd": 1.6})
    second = from_spec(
        {
            "kind": "lognormal",
            "radius_um": None,
            "effective_radius_um": first.effective_radius_um,
            "effective_variance": first.effective_variance,
        }
    )
    assert isinstance(second, Lognormal)
    assert second.median_um == pytest.approx(0.15, rel=1e-12)
    assert second.log_sd == pytest.approx(math.log(1.6), rel=1e-12)


@pytest.mark.parametrize(
    "spec",
    [
        {"kind": "power", "radius_um": 1.0},
        {"kind": "lognormal", "radius_um": 1.0},
        {"kind": "lognormal", "radius_um": 1.0, "geometric_sd": 1.0},
        {"kind": "gamma", "effective_radius_um": 1.0, "effective_variance": 0.5},
        {"kind": "gamma", "effective_radius_um": -1.0, "effective_variance": 0.1},
        {"radius_um": 1.0, "geometric_sd": 2.0},
    ],
)
def test_wrong_descriptions_are_refused(spec) -> None:
    with pytest.raises(ValueError, match=r"population|effective"):
        from_spec(spec)


@pytest.mark.parametrize("log_sd", [0.02, 0.2, 0.7])
def test_weights_integrate_cubics_exactly_however_narrow_the_distribution(log_sd: float) -> None:
    distribution = Lognormal(0.3, log_sd)
    radius = np.geomspace(0.05, 3.0, 14)
    weights = size_weights(radius, distribution.density, distribution.log_width)
    u, low, high = np.log(radius / 0.3), math.log(0.05 / 0.3), math.log(3.0 / 0.3)
    for power in range(4):
        exact, _ = quad(
            lambda v, power=power: (
                v**power * math.exp(-0.5 * (v / log_sd) ** 2) / (math.sqrt(2 * math.pi) * log_sd)
            ),
            low,
            high,
            points=[-6 * log_sd, 0.0, 6 * log_sd] if 6 * log_sd < -low else [0.0],
            epsabs=1e-13,
        )
        assert weights @ u**power == pytest.approx(exact, abs=1e-10)


def test_weights_converge_on_a_steep_cross_section() -> None:
    """Rayleigh scattering: an efficiency of r^4 on a cross section of r^2."""
    distribution = Gamma(0.4, 0.1)
    exact = distribution.moment(6)
    errors = []
    for count in (30, 60, 120):
        radius = np.geomspace(0.01, 8.0, count)
        weights = size_weights(radius, distribution.density, distribution.log_width, power=2)
        errors.append(abs(weights @ radius**4 / exact - 1))
    # A cubic's error falls as the fourth power of the step; the last ratio of radii is 1.06.
    assert errors[1] < errors[0] / 10
    assert errors[2] < errors[1] / 10
    assert errors[2] < 1e-4


def test_weights_with_few_sizes_and_wrong_ones() -> None:
    weights = size_weights([1.0, math.e], lambda r: np.ones_like(r), 1.0)
    np.testing.assert_allclose(weights, [0.5, 0.5], rtol=1e-14)
    for radii in ([1.0], [1.0, 1.0], [2.0, 1.0]):
        with pytest.raises(ValueError, match="increase"):
            size_weights(radii, lambda r: np.ones_like(r), 1.0)


def test_coarse_nodes_keep_both_ends() -> None:
    assert coarse_nodes(7).tolist() == [0, 2, 4, 6]
    assert coarse_nodes(6).tolist() == [0, 2, 4, 5]
