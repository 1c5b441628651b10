"""Generalized spherical functions against closed forms, and round trips of the series."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import eval_jacobi, eval_legendre

from scatterloom.scattering.expansion import asymmetry_parameter, expand, synthesize, wigner_d

PAIRS = [(0, 0), (0, 2), (2, 2), (2, -2)]


def jacobi_form(m: int, n: int, degree: int, x: np.ndarray) -> np.ndarray:
    """d^l_mn by Jacobi polynomials (Varshalovich et al. 1988, section 4.3, eq. 13)."""
    mu, nu = abs(m - n), abs(m + n)
    s = degree - (mu + nu) // 2
    if s < 0:
        return np.zeros_like(x)
    # The sign factor of that formula is +1 for these pairs (n >= m, or m - n even).
    norm = math.exp(
        0.5
        * (
            math.lgamma(s + 1)
            + math.lgamma(s + mu + nu + 1)
            - math.lgamma(s + mu + 1)
            - math.lgamma(s + nu + 1)
        )
    )
    half = ((1 - x) / 2) ** (mu / 2) * ((1 + x) / 2) ** (nu / 2)
    return norm * half * eval_jacobi(s, mu, nu, x)


@pytest.mark.parametrize(("m", "n"), PAIRS)
def test_wigner_functions_equal_jacobi_polynomials(m: int, n: int) -> None:
    x = np.cos(np.deg2rad(np.linspace(0.0, 180.0, 181)))
    d = wigner_d(m, n, 400, x)
    for degree in (0, 1, 2, 3, 7, 40, 133, 400):
        # Rounding of x alone moves the function by about degree^2 * 1e-16.
        np.testing.assert_allclose(d[degree], jacobi_form(m, n, degree, x), atol=2e-11)


def test_legendre_polynomials_are_the_scalar_case() -> None:
    x = np.linspace(-1.0, 1.0, 51)
    d = wigner_d(0, 0, 30, x)
    for degree in range(31):
        np.testing.assert_allclose(d[degree], eval_legendre(degree, x), atol=1e-13)


@pytest.mark.parametrize(("m", "n"), PAIRS)
def test_orthogonality(m: int, n: int) -> None:
    x, w = np.polynomial.legendre.leggauss(301)
    d = wigner_d(m, n, 300, x)
    gram = (d * w) @ d.T
    expected = np.diag(2.0 / (2.0 * np.arange(301) + 1.0))
    expected[: max(abs(m), abs(n))] = 0.0
    np.testing.assert_allclose(gram, expected, atol=1e-13)


def test_forward_and_backward_values() -> None:
    ends = np.array([1.0, -1.0])
    sign = (-1.0) ** np.arange(2, 301)
    # Equal orders: 1 forward; opposite orders: (-1)^l backward; all else vanishes.
    assert np.abs(wigner_d(2, 2, 300, ends)[2:] - np.array([1.0, 0.0])).max() < 1e-11
    flip = wigner_d(2, -2, 300, ends)[2:]
    np.testing.assert_allclose(flip, np.stack([0.0 * sign, sign], axis=1), atol=1e-11)
    assert np.abs(wigner_d(0, 2, 300, ends)).max() == 0.0


def rayleigh(angles_deg: np.ndarray) -> np.ndarray:
    """Rayleigh scattering matrix (Bohren & Huffman 1983, eq. 5.6), mean F11 of 1."""
    c = np.cos(np.deg2rad(angles_deg))
    f = np.zeros((c.size, 4, 4))
    f[:, 0, 0] = f[:, 1, 1] = 0.75 * (1 + c**2)
    f[:, 0, 1] = f[:, 1, 0] = -0.75 * (1 - c**2)
    f[:, 2, 2] = f[:, 3, 3] = 1.5 * c
    return f


def test_rayleigh_coefficients() -> None:
    # a1 = (1, 0, 1/2), a2 = (0, 0, 3), a3 = 0, a4 = (0, 3/2, 0), b1_2 = sqrt(6)/2
    # (de Haan, Bosma & Hovenier 1987, table 1 with no depolarization).
    x, w = np.polynomial.legendre.leggauss(8)
    c = expand(rayleigh(np.rad2deg(np.arccos(x))), x, w)
    expected = np.zeros((8, 4, 4))
    expected[0, 0, 0], expected[2, 0, 0] = 1.0, 0.5
    expected[2, 1, 1] = 3.0
    expected[1, 3, 3] = 1.5
    expected[2, 0, 1] = expected[2, 1, 0] = math.sqrt(6) / 2
    np.testing.assert_allclose(c, expected, atol=1e-14)
    assert abs(asymmetry_parameter(c)) < 1e-15
    angles = np.linspace(0, 180, 37)
    np.testing.assert_allclose(synthesize(c, angles), rayleigh(angles), atol=1e-14)


def random_coefficients(l_max: int, lead: tuple[int, ...], seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    c = rng.normal(size=(*lead, l_max + 1, 4, 4))
    c[..., :2, :, 1:3] = 0.0  # orders of 2 start at degree 2
    c[..., :2, 1:3, :] = 0.0
    return c


@pytest.mark.parametrize("l_max", [3, 24, 200])
def test_round_trip_of_all_sixteen_elements(l_max: int) -> None:
    x, w = np.polynomial.legendre.leggauss(l_max + 1)
    c = random_coefficients(l_max, (2,), 11)
    f = synthesize(c, np.rad2deg(np.arccos(x)))
    back = expand(f, x, w)
    np.testing.assert_allclose(back, c, atol=1e-12 * np.abs(f).max())
    short = expand(f, x, w, l_max=2)
    np.testing.assert_allclose(short, c[:, :3], atol=1e-12 * np.abs(f).max())


def test_linear_block_is_the_circular_representation() -> None:
    """The block acts on z = (Q + iU)/2 through d22 and d2,-2 with complex coefficients."""
    angles = np.linspace(0, 180, 19)
    x = np.cos(np.deg2rad(angles))
    c = random_coefficients(6, (), 5)
    f = synthesize(c, angles)
    same = 0.5 * (c[:, 1, 1] + c[:, 2, 2] + 1j * (c[:, 2, 1] - c[:, 1, 2]))
    flip = 0.5 * (c[:, 1, 1] - c[:, 2, 2] + 1j * (c[:, 2, 1] + c[:, 1, 2]))
    q, u = 0.3, -0.8
    z = 0.5 * (q + 1j * u)
    out = (same @ wigner_d(2, 2, 6, x)) * z + (flip @ wigner_d(2, -2, 6, x)) * np.conj(z)
    np.testing.assert_allclose(2 * out.real, f[:, 1, 1] * q + f[:, 1, 2] * u, atol=1e-13)
    np.testing.assert_allclose(2 * out.imag, f[:, 2, 1] * q + f[:, 2, 2] * u, atol=1e-13)


def test_rotation_turns_the_block_like_a_second_rank_field() -> None:
    """A pure rotation about the beam, R(-a) at 0 deg, needs only the helicity-keeping part."""
    a = np.deg2rad(17.0)
    block = np.array([[np.cos(2 * a), np.sin(2 * a)], [-np.sin(2 * a), np.cos(2 * a)]])
    x, w = np.polynomial.legendre.leggauss(40)
    f = np.zeros((40, 4, 4))
    f[:, 1:3, 1:3] = block * (0.5 * (1 + x))[:, None, None] ** 2
    c = expand(f, x, w)
    assert np.abs(c[:, 1, 1] - c[:, 2, 2]).max() < 1e-14
    assert np.abs(c[:, 2, 1] + c[:, 1, 2]).max() < 1e-14
    np.testing.assert_allclose(c[2, 1:3, 1:3], block, atol=1e-14)


def test_asymmetry_parameter_is_the_mean_cosine() -> None:
    x, w = np.polynomial.legendre.leggauss(120)
    g = 0.6
    f = np.zeros((120, 4, 4))
    f[:, 0, 0] = (1 - g**2) / (1 + g**2 - 2 * g * x) ** 1.5  # Henyey & Greenstein 1941
    c = expand(f, x, w)
    # Legendre coefficients of this function are (2l + 1) g^l.
    degree = np.arange(20)
    np.testing.assert_allclose(c[:20, 0, 0], (2 * degree + 1) * g**degree, atol=1e-11)
    assert asymmetry_parameter(c) == pytest.approx(g, rel=1e-12)
    assert asymmetry_parameter(c[:1]) == 0.0


def test_wrong_arguments_are_refused() -> None:
    x, w = np.polynomial.legendre.leggauss(4)
    with pytest.raises(ValueError, match="one of"):
        wigner_d(1, 1, 3, x)
    with pytest.raises(ValueError, match="l_max"):
        wigner_d(0, 0, -1, x)
    with pytest.raises(ValueError, match="n_node"):
        expand(np.zeros((5, 4, 4)), x, w)
    with pytest.raises(ValueError, match="l_max"):
        expand(np.zeros((4, 4, 4)), x, w, l_max=4)
    with pytest.raises(ValueError, match="l_max"):
        synthesize(np.zeros((4, 3)), [0.0])
