"""Angular functions, rotations and plane waves: against scipy and the plane wave itself."""

import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.special import sph_harm_y

from oracles import waves
from scatterloom.waves.angular import axial_plane_wave, polar_functions, wigner_d
from scatterloom.waves.basis import complex_from_real, wave_basis
from scatterloom.waves.fields import wave_fields


def test_polar_functions_are_the_components_of_vector_harmonics():
    # B = c (tau e_theta + i pi e_phi) e^(i m phi); at phi = 0.
    n_max, theta = 7, np.array([0.01, 0.4, 1.2, np.pi / 2, 2.9, 3.13])
    pi, tau = polar_functions(n_max, np.cos(theta))
    assert pi.shape == tau.shape == (n_max + 1, 2 * n_max + 1, len(theta))
    for n in range(1, n_max + 1):
        for m in range(-n_max, n_max + 1):
            if abs(m) > n:
                assert not pi[n, n_max + m].any() and not tau[n, n_max + m].any()
                continue
            _, b, _ = waves.vector_harmonics(n, m, theta, np.zeros_like(theta))
            # rounding of the cosine next to the poles: 1e-16 / 0.01
            np.testing.assert_allclose(tau[n, n_max + m], b[0].real, atol=1e-11)
            np.testing.assert_allclose(pi[n, n_max + m], b[1].imag, atol=1e-11)
    assert not pi[0].any() and not tau[0].any()


def test_polar_functions_at_the_poles():
    # Only |m| = 1 is left: pi = m d/sin -> sqrt(n(n+1))/2 (Bohren & Huffman 1983, sec. 4.3,
    # for d^n_01), tau the same at 0; at 180 degrees the parity (-1)^(n+1) and (-1)^n.
    n_max = 6
    pi, tau = polar_functions(n_max, np.array([1.0, -1.0]))
    for n in range(1, n_max + 1):
        c = np.sqrt((2 * n + 1) / (4 * np.pi * n * (n + 1)))
        half = c * np.sqrt(n * (n + 1)) / 2
        np.testing.assert_allclose(
            pi[n, n_max + 1], half * np.array([1, (-1) ** (n + 1)]), rtol=1e-13
        )
        np.testing.assert_allclose(tau[n, n_max + 1], half * np.array([1, (-1) ** n]), rtol=1e-13)
        np.testing.assert_allclose(pi[n, n_max - 1], pi[n, n_max + 1], rtol=1e-13)
        np.testing.assert_allclose(tau[n, n_max - 1], -tau[n, n_max + 1], rtol=1e-13)
    others = np.delete(np.arange(2 * n_max + 1), [n_max - 1, n_max + 1])
    assert not pi[:, others].any() and np.abs(tau[:, others]).max() < 1e-15


@pytest.mark.parametrize("n", [0, 1, 2, 5, 11])
def test_rotation_functions_turn_scipy_harmonics(n):
    # Y_m(R^-1 r) = sum_m' Y_m'(r) d_m'm(beta) for a turn R by beta about y
    # (Varshalovich et al. 1988, section 4.1), in the phase without Condon-Shortley sign.
    beta = np.array([0.0, 0.3, 1.9, np.pi, -0.8])
    d = wigner_d(n, beta)
    assert d.shape == (len(beta), 2 * n + 1, 2 * n + 1)
    rng = np.random.default_rng(3)
    r = rng.normal(size=(30, 3))
    order = np.arange(-n, n + 1)

    def harmonics(at):
        _, theta, phi = waves.angles(at)
        return np.array([(-1.0) ** m * sph_harm_y(n, m, theta, phi) for m in order])

    for angle, matrix in zip(beta, d, strict=True):
        turned = Rotation.from_euler("y", angle).inv().apply(r)
        np.testing.assert_allclose(harmonics(turned), matrix.T @ harmonics(r), atol=1e-13)
        np.testing.assert_allclose(matrix @ matrix.T, np.eye(2 * n + 1), atol=1e-13)


def test_rotation_functions_of_degree_one():
    # Closed form (Varshalovich et al. 1988, section 4.16) with the sign (-1)^(m-m').
    beta = np.array([0.7])
    c, s = np.cos(0.7), np.sin(0.7) / np.sqrt(2.0)
    expected = [[(1 + c) / 2, -s, (1 - c) / 2], [s, c, -s], [(1 - c) / 2, s, (1 + c) / 2]]
    np.testing.assert_allclose(wigner_d(1, beta)[0], expected, atol=1e-15)


def plane_wave_coefficients(n_max, theta, phi, field):
    """a = 4 pi i^n C*.E0 for M and b = 4 pi i^(n-1) B*.E0 for N waves (Mishchenko et al. 2002)."""
    _, labels = complex_from_real(n_max)
    _, polar, azimuthal = waves.unit_vectors(theta, phi)
    pi, tau = polar_functions(n_max, np.array([np.cos(theta)]))
    out = []
    for kind, n, m in zip(labels.kind, labels.degree, labels.order, strict=True):
        p, t = pi[n, n_max + m, 0], tau[n, n_max + m, 0]
        vector = 1j * p * polar - t * azimuthal if kind == 0 else t * polar + 1j * p * azimuthal
        vector = vector * np.exp(1j * m * phi)
        out.append(4 * np.pi * 1j ** (n - kind) * (vector.conj() @ field))
    return np.array(out)


@pytest.mark.parametrize(("theta", "phi"), [(0.8, 2.1), (2.7, -0.4), (0.0, 0.0), (np.pi, 0.0)])
def test_plane_wave_is_the_sum_of_its_waves(theta, phi):
    n_max = 14
    radial, polar, azimuthal = waves.unit_vectors(theta, phi)
    field = (0.6 + 0.3j) * polar - (0.2 - 0.9j) * azimuthal
    change, _ = complex_from_real(n_max)
    real = change.conj().T @ plane_wave_coefficients(n_max, theta, phi, field)
    rng = np.random.default_rng(4)
    at = rng.normal(size=(20, 3))
    at *= 2.5 / np.linalg.norm(at, axis=1, keepdims=True)
    total = np.tensordot(real, wave_fields(wave_basis(n_max), at), 1)
    expected = field[:, None] * np.exp(1j * at @ radial)
    # the first wave left out is of the order of j_15(2.5) = 2e-12 times sqrt(31 / 4 pi) 4 pi
    np.testing.assert_allclose(total, expected, atol=1e-9)


@pytest.mark.parametrize("theta", [0.0, 1e-6])
def test_axial_wave_is_the_limit_of_the_general_one(theta):
    n_max = 9
    magnetic, electric = axial_plane_wave(n_max)
    _, labels = complex_from_real(n_max)
    for row, hand in enumerate((1, -1)):
        _, polar, azimuthal = waves.unit_vectors(theta, 0.0)
        field = (polar + 1j * hand * azimuthal) / np.sqrt(2.0)
        expected = plane_wave_coefficients(n_max, theta, 0.0, field)
        found = np.zeros(len(expected), complex)
        for i, (kind, n, m) in enumerate(
            zip(labels.kind, labels.degree, labels.order, strict=True)
        ):
            if m == hand:
                found[i] = (magnetic, electric)[kind][row, n]
        # linear in the small angle, times n(n+1)
        np.testing.assert_allclose(found, expected, atol=1e-12 + 1e3 * theta)
    assert not magnetic[:, 0].any() and not electric[:, 0].any()
