"""Size distributions and quadrature weights against closed forms and direct integration."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import gamma as scipy_gamma
from scipy.stats import gengamma, lognorm

from scatterloom.bulk.weights import coarse_nodes, size_weights
from scatterloom.campaign.composed import Reweighted, Sum, Tabulated, by
from scatterloom.campaign.distribution import Gamma, Lognormal, ModifiedGamma, PowerLaw

ROWS = np.geomspace(0.05, 2.0, 9)
FINE, COARSE = Lognormal(0.1, math.log(1.5)), Gamma(0.8, 0.1)
DISTRIBUTIONS = [
    Lognormal(0.15, math.log(1.6)),
    Gamma(0.4, 0.12),
    Lognormal(1.0, 0.05),
    ModifiedGamma(0.3, 2.0, 0.8),
    PowerLaw(4.0, 0.05, 2.0),
    PowerLaw(3.0, 0.1, 0.5),  # the order 2 meets the logarithm
    Sum.of([FINE, COARSE], [0.3, 0.7], 3),
    Reweighted(Lognormal(0.5, 0.3), 3),
    Reweighted(PowerLaw(1.0, 0.1, 3.0), 2),
    Tabulated(ROWS, np.array([0.0, 1.0, 3.0, 2.0, 0.0, 0.0, 1.0, 0.5, 0.0])),
]


@pytest.mark.parametrize("distribution", DISTRIBUTIONS, ids=repr)
def test_moments_and_shares_against_direct_integration(distribution) -> None:
    low, high = (math.log(r) for r in distribution.span_um)
    if not distribution.breaks_um:
        low, high = low - 8 * distribution.log_width, high + 6 * distribution.log_width
    stops = [math.log(r) for r in distribution.breaks_um]

    def integral(order: float, start: float, stop: float) -> float:
        def integrand(u: float) -> float:
            return float(distribution.density(math.exp(u))) * math.exp(order * u)

        edges = [start, *(s for s in stops if start < s < stop), stop]
        edges = np.unique(np.concatenate([np.linspace(a, b, 12) for a, b in pairwise(edges)]))
        parts = [quad(integrand, a, b, epsabs=1e-14, epsrel=1e-11)[0] for a, b in pairwise(edges)]
        return math.fsum(parts)

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


def test_modified_gamma_is_that_of_scipy_and_has_its_mode() -> None:
    d = ModifiedGamma(0.3, 2.0, 0.8)
    r = np.geomspace(0.02, 5.0, 25)
    expected = r * gengamma.pdf(r, 3.0 / 0.8, 0.8, scale=0.3 * (0.8 / 2.0) ** (1 / 0.8))
    np.testing.assert_allclose(d.density(r), expected, rtol=1e-10)
    near = np.array([0.299, 0.3, 0.301])
    assert np.argmax(d.density(near) / near) == 1
    # A gamma distribution is the case gamma = 1: alpha = (1 - 3b)/b, mode a (1 - 3b).
    a, b = 0.4, 0.12
    same = ModifiedGamma(a * (1 - 3 * b), (1 - 3 * b) / b, 1.0)
    np.testing.assert_allclose(same.density(r), Gamma(a, b).density(r), rtol=1e-10)


def test_weighting_follows_hatch_and_choate() -> None:
    """The number median of a lognormal volume distribution is r_v exp(-3 s^2)."""
    volume, number = Lognormal(0.5, 0.4), Lognormal(0.5 * math.exp(-3 * 0.16), 0.4)
    r = np.geomspace(0.05, 2.0, 20)
    weighted = by(volume, "volume")
    np.testing.assert_allclose(weighted.density(r), number.density(r), rtol=1e-12)
    for order in (0, 2, 3):
        assert weighted.moment(order) == pytest.approx(number.moment(order), rel=1e-12)
        below = weighted.share_below(0.3, order)
        assert below == pytest.approx(number.share_below(0.3, order), rel=1e-12)
    assert by(number, "number") is number


def test_shares_of_modes_by_volume() -> None:
    both = Sum.of([FINE, COARSE], [0.3, 0.7], 3)
    fine, coarse = both.shares
    assert fine + coarse == pytest.approx(1.0, abs=1e-14)
    volume = fine * FINE.moment(3), coarse * COARSE.moment(3)
    assert volume[0] / sum(volume) == pytest.approx(0.3, rel=1e-12)


def test_a_finely_tabulated_lognormal_is_that_lognormal() -> None:
    exact = Lognormal(0.2, 0.4)
    r = np.geomspace(0.01, 4.0, 400)
    table = Tabulated(r, 7.0 * exact.density(r))
    for order in (1, 2, 3):
        assert table.moment(order) == pytest.approx(exact.moment(order), rel=3e-4)
    assert table.effective_variance == pytest.approx(exact.effective_variance, rel=1e-3)


def test_a_diverging_number_of_particles_is_refused() -> None:
    with pytest.raises(ValueError, match="diverges"):
        by(ModifiedGamma(0.3, 1.5, 1.0), "volume").moment(2)


def test_weights_stop_at_jumps() -> None:
    """A power law that ends within the table's steps is integrated to rounding."""
    d = PowerLaw(4.0, 0.11, 0.77)
    radius = np.geomspace(0.05, 3.0, 14)
    weights = size_weights(radius, d.density, d.log_width, power=2, breaks_um=d.breaks_um)
    assert weights.sum() == pytest.approx(d.moment(2), rel=1e-10)


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
    assert coarse_nodes(7, 1).tolist() == [0, 1, 3, 5, 6]
    assert coarse_nodes(6, 1).tolist() == [0, 1, 3, 5]
