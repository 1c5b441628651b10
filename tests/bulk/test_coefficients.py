"""Expansion coefficients from angle grids: Rayleigh, Mie, delta-M in closed form."""

from __future__ import annotations

import math

import numpy as np
import pytest

from oracles import rayleigh
from oracles.mie import sphere
from scatterloom.bulk.coefficients import NAMES, delta_m, evaluate, fit_series, matrices_of
from scatterloom.scattering.expansion import expand

ANGLES = np.arange(0.0, 181.0)
RAYLEIGH = np.zeros((3, 6))
# Hansen & Travis 1974, section 2.6; numbers as in Hovenier & van der Mee 1983, table 1.
RAYLEIGH[:, 0], RAYLEIGH[2, 1], RAYLEIGH[1, 3] = (1.0, 0.0, 0.5), 3.0, 1.5
RAYLEIGH[2, 4] = math.sqrt(6.0) / 2.0


def test_rayleigh_in_closed_form() -> None:
    matrix = rayleigh.scattering_matrix((1.0, 1.0, 1.0), 1.5 + 0.01j, ANGLES)
    series = fit_series(matrix, 0.01 * np.abs(matrix), ANGLES)
    np.testing.assert_allclose(series.coefficients, RAYLEIGH, atol=1e-12)
    assert series.truncation_error < 1e-12 and abs(series.normalization_defect) < 1e-12
    assert series.resolved
    # A common error of 1 % of F11 changes a1_0 by 1 %, and cannot change it by more.
    assert series.half_widths[0, 0] == pytest.approx(0.01, rel=1e-3)
    assert np.all(series.half_widths[2, [0, 1, 4]] > 0.0)


@pytest.mark.parametrize(("x", "index"), [(3.0, 1.5 + 0.01j), (12.0, 1.33 + 0.0j)])
def test_mie_against_exact_projection(x: float, index: complex) -> None:
    """Gauss-Legendre projection of the series: products of amplitudes have finite degree."""
    ball = sphere(index, x)
    node, weight = np.polynomial.legendre.leggauss(2 * len(ball.a) + 2)
    exact = expand(ball.scattering_matrix(np.degrees(np.arccos(node))), node, weight)
    matrix = ball.scattering_matrix(ANGLES)
    series = fit_series(matrix, 0.0 * matrix, ANGLES)
    count = len(series.coefficients)
    assert series.resolved and 2 * x < count < 2 * x + 20
    np.testing.assert_allclose(matrices_of(series.coefficients), exact[:count], atol=1e-9)
    assert np.abs(exact[count:, 0, 0]).max() < 1e-3
    assert series.coefficients[1, 0] / 3.0 == pytest.approx(ball.asymmetry_parameter, abs=1e-10)
    # Summed again between the angles of the grid, where it was not fitted.
    between = np.arange(0.5, 180.0, 7.0)
    again, there = evaluate(series.coefficients, between), ball.scattering_matrix(between)
    assert np.abs(again - there).max() / there[:, 0, 0].min() < 1e-3
    assert np.all(np.abs(again - there) <= 3e-5 * there[:, :1, :1])


def test_uneven_angles_are_fitted() -> None:
    ball = sphere(1.4 + 0.0j, 2.0)
    angles = np.concatenate([np.arange(0.0, 20.0, 1.0), np.arange(20.0, 181.0, 4.0)])
    matrix = ball.scattering_matrix(angles)
    series = fit_series(matrix, 0.0 * matrix, angles)
    assert series.resolved
    assert series.coefficients[1, 0] / 3.0 == pytest.approx(ball.asymmetry_parameter, abs=1e-6)


def test_coarse_angles_are_told() -> None:
    ball = sphere(1.33 + 0.0j, 30.0)
    angles = np.arange(0.0, 181.0, 6.0)
    series = fit_series(ball.scattering_matrix(angles), np.zeros((31, 4, 4)), angles)
    assert not series.resolved and series.truncation_error > 0.01


def test_half_widths_bound_what_errors_can_do() -> None:
    """Any error of the matrix within its half widths moves coefficients within theirs."""
    matrix = sphere(1.5 + 0.01j, 3.0).scattering_matrix(ANGLES)
    width = 0.02 * np.abs(matrix) + 1e-3
    base = fit_series(matrix, width, ANGLES)
    random = np.random.default_rng(1)
    for trial in range(20):
        sign = random.choice([-1.0, 1.0], ANGLES.size) if trial % 2 else np.cos(trial * ANGLES)
        moved = matrix + sign[:, None, None] * width * (np.abs(matrix) > 0.0)
        other = fit_series(moved, width, ANGLES)
        count = min(len(base.coefficients), len(other.coefficients))
        scale = 1.0 + other.normalization_defect
        apart = np.abs(other.coefficients[:count] * scale - base.coefficients[:count])
        assert np.all(apart <= base.half_widths[:count] + 1e-9)


def test_angles_must_cover_the_sphere() -> None:
    matrix = np.ones((10, 4, 4))
    with pytest.raises(ValueError, match="0 to 180"):
        fit_series(matrix, matrix, np.linspace(5.0, 180.0, 10))
    with pytest.raises(ValueError, match="8 angles"):
        fit_series(matrix[:5], matrix[:5], np.linspace(0.0, 180.0, 5))


@pytest.mark.parametrize("streams", [2, 8, 16])
def test_delta_m_of_henyey_and_greenstein(streams: int) -> None:
    """a1_l = (2l + 1) g^l gives f = g^2M and (2l + 1)(g^l - f)/(1 - f) (Wiscombe 1977)."""
    g, degree = 0.8, np.arange(60)
    c = np.zeros((60, 6))
    c[:, 0] = (2 * degree + 1) * g**degree
    c[:, 3] = 0.9 * c[:, 0]
    scaled = delta_m(c, streams)
    f = g**streams
    assert scaled.forward_fraction == pytest.approx(f, rel=1e-12)
    n = np.arange(streams)
    np.testing.assert_allclose(
        scaled.coefficients[:, 0], (2 * n + 1) * (g**n - f) / (1 - f), rtol=1e-10, atol=1e-12
    )
    assert scaled.coefficients[0, 0] == pytest.approx(1.0, abs=1e-14)
    # Absorption is untouched: (1 - w') c' = (1 - w) c; transport: c'(1 - w' g') = c(1 - w g).
    w, ext = 0.9, 2.0
    ext2, w2 = scaled.extinction(ext, w), scaled.albedo(w)
    assert (1 - w2) * ext2 == pytest.approx((1 - w) * ext, rel=1e-12)
    g2 = scaled.coefficients[1, 0] / 3.0
    assert ext2 * (1 - w2 * g2) == pytest.approx(ext * (1 - w * g), rel=1e-12)


def test_delta_m_takes_the_unit_matrix_from_the_forward_peak() -> None:
    """A peak that is the unit matrix vanishes altogether, for all six elements."""
    degree = np.arange(40)
    peak = np.zeros((40, 6))
    peak[:, [0, 3]] = (2 * degree + 1)[:, None]
    peak[2:, 1:3] = (2 * degree[2:] + 1)[:, None]
    smooth = np.zeros((40, 6))
    smooth[:3] = RAYLEIGH
    scaled = delta_m(0.3 * peak + 0.7 * smooth, 8)
    assert scaled.forward_fraction == pytest.approx(0.3, rel=1e-12)
    np.testing.assert_allclose(scaled.coefficients, smooth[:8], atol=1e-12)


def test_a_short_series_needs_no_scaling_and_odd_streams_are_refused() -> None:
    scaled = delta_m(RAYLEIGH, 4)
    assert scaled.forward_fraction == 0.0
    np.testing.assert_array_equal(scaled.coefficients[:3], RAYLEIGH)
    for streams in (0, 3):
        with pytest.raises(ValueError, match="even"):
            delta_m(RAYLEIGH, streams)
    assert len(NAMES) == 6
