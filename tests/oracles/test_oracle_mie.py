"""The Mie oracle against limits and sum rules; published values: tests/test_check_values.py."""

import numpy as np
import pytest

from oracles.mie import sphere
from oracles.mueller import gauss_angles, mueller

CASES = [(1.5 + 0.01j, 3.0), (1.311, 8.0), (1.75 + 0.44j, 4.3), (0.75, 10.0)]


@pytest.mark.parametrize(("index", "x"), CASES)
def test_sums_over_angle_meet_sums_over_order(index, x):
    ball = sphere(index, x)
    angles, weights = gauss_angles(80)
    matrix = ball.scattering_matrix(angles)
    f11 = matrix[:, 0, 0]
    assert 0.5 * weights @ f11 == pytest.approx(1.0, rel=1e-12)
    cosine = np.cos(np.radians(angles))
    assert 0.5 * weights @ (f11 * cosine) == pytest.approx(ball.asymmetry_parameter, abs=1e-12)
    # optical theorem: Qext = 4 Re S(0) / x^2 (Bohren & Huffman 1983, eq. 4.76)
    s1, s2 = ball.amplitudes([0.0, 180.0])
    assert 4 * s1[0].real / x**2 == pytest.approx(ball.extinction_efficiency, rel=1e-12)
    assert s2[0] == pytest.approx(s1[0], rel=1e-12)
    assert 4 * abs(s1[1]) ** 2 / x**2 == pytest.approx(ball.backscattering_efficiency, rel=1e-10)
    # a pure amplitude matrix: F11^2 = F12^2 + F33^2 + F34^2
    np.testing.assert_allclose(
        f11**2,
        matrix[:, 0, 1] ** 2 + matrix[:, 2, 2] ** 2 + matrix[:, 2, 3] ** 2,
        rtol=1e-12,
    )


def test_no_absorption_without_imaginary_part():
    assert sphere(1.5, 5.0).absorption_efficiency == pytest.approx(0.0, abs=1e-13)
    assert sphere(1.5 + 1e-3j, 5.0).absorption_efficiency > 0


def test_rayleigh_limit():
    # Bohren & Huffman 1983, eq. 5.7, 5.8; next order x^2
    x, m = 1e-3, 1.5 + 0.1j
    contrast = (m**2 - 1) / (m**2 + 2)
    ball = sphere(m, x)
    assert ball.scattering_efficiency == pytest.approx(
        8 / 3 * x**4 * abs(contrast) ** 2, rel=1e-5, abs=0
    )
    assert ball.absorption_efficiency == pytest.approx(4 * x * contrast.imag, rel=1e-5, abs=0)
    angles = np.array([0.0, 37.0, 90.0, 150.0])
    mu = np.cos(np.radians(angles))
    matrix = ball.scattering_matrix(angles)
    np.testing.assert_allclose(matrix[:, 0, 0], 0.75 * (1 + mu**2), rtol=1e-5)
    np.testing.assert_allclose(matrix[:, 0, 1], -0.75 * (1 - mu**2), atol=1e-5)
    np.testing.assert_allclose(matrix[:, 2, 2], 1.5 * mu, atol=1e-5)


def test_mueller_matrix_acts_as_the_amplitude_matrix():
    # I, Q, U, V of a random field before and after, straight from their definition
    # (Bohren & Huffman 1983, eq. 2.80 and 3.16 with E_par, E_perp).
    random = np.random.default_rng(7)
    s1, s2, s3, s4 = random.normal(size=4) + 1j * random.normal(size=4)
    par, perp = random.normal(size=2) + 1j * random.normal(size=2)

    def stokes(par, perp):
        product = par * np.conj(perp)
        return np.array(
            [
                abs(par) ** 2 + abs(perp) ** 2,
                abs(par) ** 2 - abs(perp) ** 2,
                2 * product.real,
                -2 * product.imag,
            ]
        )

    scattered = stokes(s2 * par + s3 * perp, s4 * par + s1 * perp)
    np.testing.assert_allclose(mueller(s1, s2, s3, s4) @ stokes(par, perp), scattered, rtol=1e-12)
