"""The dense coupled-dipole oracle against integrals, conservation laws and the Mie series."""

import numpy as np
import pytest
from scipy import integrate
from scipy.integrate import lebedev_rule

from oracles import dense, rayleigh
from oracles.mie import sphere
from oracles.mueller import gauss_angles
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec


def particle(spec, index, size_parameter, cells_across):
    cells = lattice(from_spec(spec), cells_across)
    permittivity = dense.cell_permittivity(cells.fill, cells.normal, index**2)
    alpha = dense.cell_polarizability(permittivity, size_parameter, cells.spacing)
    return dense.DenseLattice(cells.centre(), alpha, size_parameter, cells.spacing)


@pytest.fixture(scope="module")
def triaxial():
    return particle({"kind": "ellipsoid", "axes": [3, 2, 1]}, 1.5 + 0.05j, 1.2, 7)


def point_green(separation, k):
    r = np.linalg.norm(separation)
    unit = separation / r
    g = np.exp(1j * k * r) / r
    g1 = (1j * k - 1 / r) * g
    g2 = (-(k**2) - 2j * k / r + 2 / r**2) * g
    return np.eye(3) * (k**2 * g + g1 / r) + np.outer(unit, unit) * (g2 - g1 / r)


def test_filtered_function_is_the_cut_fourier_integral():
    # g(R) = (2 / (pi R)) PV int_0^k_F q sin(qR) / (q^2 - k^2) dq + i sin(kR) / R: the
    # spectrum of exp(ikR)/R without wavenumbers above k_F.
    k, spacing, step = 0.8, 0.7, 1e-3
    cut = np.pi / spacing

    def g(r):
        value, _ = integrate.quad(
            lambda q: q * np.sin(q * r) / (q + k), 0, cut, weight="cauchy", wvar=k, epsabs=1e-12
        )
        return 2 / (np.pi * r) * value + 1j * np.sin(k * r) / r

    for r in (0.7, 1.4, 2.9):
        field = dense.filtered_green(np.array([[0.0, 0.0, r]]), k, spacing)[0]
        low, middle, high = g(r - step), g(r), g(r + step)
        slope = (high - low) / (2 * step)
        curvature = (high - 2 * middle + low) / step**2
        # differences of step 1e-3: errors step^2 g'''' ~ 1e-4
        assert field[2, 2] == pytest.approx(k**2 * middle + curvature, rel=3e-4)
        assert field[0, 0] == pytest.approx(k**2 * middle + slope / r, rel=3e-4)
        assert field[0, 1] == 0


def test_radiative_part_is_that_of_a_point_dipole():
    # Wavenumbers beyond k_F carry no power: the imaginary part of the interaction
    # does not know of the filter.
    separation = np.array([[0.5, -0.8, 1.1], [0.7, 0.0, 0.0], [-3.0, 2.0, 5.0]])
    filtered = dense.filtered_green(separation, 1.3, 0.7)
    expected = [point_green(r, 1.3).imag for r in separation]
    np.testing.assert_allclose(filtered.imag, expected, rtol=1e-11, atol=1e-13)
    assert dense.on_site(1.3, 0.7).imag == pytest.approx(2 / 3 * (1.3 * 0.7) ** 3, rel=1e-14)


def test_self_term_is_the_interaction_at_zero_distance():
    # V G(0) = (2 d^3 / pi) PV int_0^k_F q^2 (k^2 - q^2/3) / (q^2 - k^2) dq + i (2/3) (kd)^3:
    # the filtered field of a dipole at its own place is finite.
    k, spacing = 1.3, 0.7
    integral, _ = integrate.quad(
        lambda q: q**2 * (k**2 - q**2 / 3) / (q + k),
        0,
        np.pi / spacing,
        weight="cauchy",
        wvar=k,
        epsabs=1e-12,
    )
    self_term = dense.on_site(k, spacing)
    assert self_term.real == pytest.approx(2 * spacing**3 / np.pi * integral, rel=1e-9)
    # and the interaction tends to it, by (k_F r)^2 / 10 at short distance
    near = dense.filtered_green(np.array([[0.0, 0.02 * spacing, 0.0]]), k, spacing)[0]
    np.testing.assert_allclose(near * spacing**3, self_term * np.eye(3), rtol=2e-3, atol=1e-12)


def test_energy_balance(triaxial):
    # The imaginary parts of filtered interaction and self term are those of radiation,
    # so extinction less absorption is the power scattered: to rounding.
    directions, weights = lebedev_rule(31)
    k_hat = np.array([1.0, 2.0, -0.5]) / np.linalg.norm([1.0, 2.0, -0.5])
    e = np.cross(k_hat, [0, 0, 1.0])
    e /= np.linalg.norm(e)
    field = triaxial.plane_wave(k_hat, e)
    moment = triaxial.polarization(field)
    extinction, absorption = triaxial.cross_sections(field, moment)
    far = triaxial.far_field(moment, directions.T)[:, :, 0]
    scattering = weights @ np.sum(np.abs(far) ** 2, axis=1) / triaxial.k**2 / np.pi
    assert absorption > 0.05
    assert extinction == pytest.approx(absorption + scattering, rel=1e-10)
    # optical theorem, Cext = 4 pi / k^2 Im(e* . F(forward))
    forward = triaxial.far_field(moment, k_hat[None])[0, :, 0]
    theorem = 4 / triaxial.k**2 * (e @ forward).imag
    assert extinction == pytest.approx(theorem, rel=1e-12)


def test_reciprocity(triaxial):
    # Reversed path: S(-s -> -i) = (S1, S2, -S4, -S3) (van de Hulst 1957, ch. 5, from
    # memory: the transpose of the matrix; signs from e_perp = scattered x incident of each path).
    i_hat = np.array([0.6, 0.0, 0.8])
    s_hat = np.array([2.0, -1.0, 0.5]) / np.linalg.norm([2.0, -1.0, 0.5])
    s1, s2, s3, s4 = triaxial.amplitude_matrix(i_hat, s_hat[None])[:, 0]
    r1, r2, r3, r4 = triaxial.amplitude_matrix(-s_hat, -i_hat[None])[:, 0]
    np.testing.assert_allclose([r1, r2, r3, r4], [s1, s2, -s4, -s3], rtol=1e-10)
    assert abs(s3) > 1e-3 * abs(s1)


def test_sphere_tends_to_mie():
    # tensor cells: error of the efficiency below 1 % at x = 1 and 10 cells, of the
    # elements below 0.02 (a sphere of x = 3 on 12 cells: 0.5 %, 0.02)
    index, x = 1.5 + 0.01j, 1.0
    ball = particle({"kind": "sphere"}, index, x, 10)
    exact = sphere(index, x)
    angles = np.linspace(0, 180, 13)
    found = ball.random_orientation(angles, degree=5, azimuths=8)
    assert found["extinction_efficiency"] == pytest.approx(exact.extinction_efficiency, rel=0.01)
    assert found["absorption_efficiency"] == pytest.approx(exact.absorption_efficiency, rel=0.02)
    expected = exact.scattering_matrix(angles)
    np.testing.assert_allclose(found["scattering_matrix"], expected, atol=0.02)
    # amplitudes with their phase: the forward one and a side one
    s1, s2, s3, s4 = ball.amplitude_matrix([0, 0, 1.0], [[np.sin(1.0), 0, np.cos(1.0)]])[:, 0]
    m1, m2 = exact.amplitudes([np.degrees(1.0)])
    assert s1 == pytest.approx(m1[0], rel=0.02)
    assert s2 == pytest.approx(m2[0], rel=0.02)
    assert abs(s3) + abs(s4) < 1e-10


def test_small_spheroid_tends_to_rayleigh():
    # cells of a static problem: 2 % of efficiencies at 10 cells across the equator
    index, x = 1.5 + 0.05j, 0.02
    spec = {"kind": "spheroid", "equatorial_to_polar": 2.0}
    half_axes = from_spec(spec).half_axes
    exact = rayleigh.efficiencies(half_axes, index, x)
    angles, weights = gauss_angles(6)
    found = particle(spec, index, x, 10).random_orientation(angles, degree=5, azimuths=8)
    for name in ("extinction_efficiency", "absorption_efficiency"):
        assert found[name] == pytest.approx(exact[name], rel=0.02)
    matrix = found["scattering_matrix"]
    # The scattered power is a small difference of two efficiencies here, so scale afresh.
    matrix = matrix / (0.5 * weights @ matrix[:, 0, 0])
    np.testing.assert_allclose(
        matrix, rayleigh.scattering_matrix(half_axes, index, angles), atol=3e-3
    )


def test_rules_with_negative_weights_are_refused(triaxial):
    with pytest.raises(ValueError, match="negative weights"):
        triaxial.random_orientation([0.0], degree=25, azimuths=4)
