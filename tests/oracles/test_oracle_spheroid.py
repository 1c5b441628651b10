"""The spheroid oracle against Mie, Rayleigh, dense coupled dipoles and conservation laws.

Tabulated spheroids: tests/test_check_values.py.
"""

import numpy as np
import pytest

from oracles import dense, rayleigh
from oracles.axial import amplitude_matrix, random_orientation
from oracles.mie import sphere
from oracles.mueller import gauss_angles
from oracles.spheroid import half_axes, spheroid, truncation
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

ANGLES = np.linspace(0, 180, 37)


@pytest.mark.parametrize(("index", "x"), [(1.5 + 0.01j, 3.0), (1.75 + 0.44j, 5.0)])
def test_sphere_has_the_mie_coefficients(index, x):
    exact, transition = sphere(index, x), spheroid(1.0, index, x)
    for m, block in transition.blocks.items():
        first, last = max(1, abs(m)) - 1, transition.n_max
        expected = np.diag(np.concatenate([-exact.b[first:last], -exact.a[first:last]]))
        np.testing.assert_allclose(block, expected, atol=1e-14)
    average = random_orientation(transition)
    for name in ("extinction_efficiency", "scattering_efficiency", "asymmetry_parameter"):
        assert getattr(average, name) == pytest.approx(getattr(exact, name), rel=1e-12)
    # degrees with coefficients below 1e-10 are left out of the matrix
    np.testing.assert_allclose(
        average.scattering_matrix(ANGLES), exact.scattering_matrix(ANGLES), atol=1e-8
    )


@pytest.mark.parametrize("ratio", [1 - 1e-4, 1 + 1e-4])
def test_near_sphere_is_near_mie(ratio):
    # Equal volume and random orientation: the deviation is of second order in 1e-4.
    index, x = 1.5 + 0.01j, 3.0
    exact, average = sphere(index, x), random_orientation(spheroid(ratio, index, x))
    for name in ("extinction_efficiency", "scattering_efficiency", "asymmetry_parameter"):
        difference = abs(getattr(average, name) - getattr(exact, name))
        assert 0 < difference < 1e-6
    np.testing.assert_allclose(
        average.scattering_matrix(ANGLES), exact.scattering_matrix(ANGLES), atol=1e-6
    )


def test_small_spheroid_is_the_rayleigh_ellipsoid():
    # next order in size is x^2 = 1e-4
    index, x, ratio = 1.6 + 0.1j, 0.01, 0.5
    equatorial, polar = half_axes(ratio)
    axes = [equatorial, equatorial, polar]
    average = random_orientation(spheroid(ratio, index, x))
    small = rayleigh.efficiencies(axes, index, x)
    for name in ("extinction_efficiency", "scattering_efficiency", "absorption_efficiency"):
        assert getattr(average, name) == pytest.approx(small[name], rel=5e-4, abs=0)
    np.testing.assert_allclose(
        average.scattering_matrix(ANGLES),
        rayleigh.scattering_matrix(axes, index, ANGLES),
        atol=5e-4,
    )


@pytest.mark.parametrize(("ratio", "x"), [(1 / 3, 2.0), (0.5, 6.0), (2.0, 4.0), (3.0, 6.0)])
def test_transparent_particle_conserves_energy(ratio, x):
    # S = 1 + 2 T is unitary, wave by wave: T + T^H + 2 T^H T = 0
    transition = spheroid(ratio, 1.5, x)
    for block in transition.blocks.values():
        lost = block + block.conj().T + 2 * block.conj().T @ block
        np.testing.assert_allclose(lost, 0, atol=1e-8)


@pytest.mark.parametrize(("ratio", "index"), [(0.5, 1.5 + 0.01j), (2.0, 1.75 + 0.44j)])
def test_reciprocity_and_truncation(ratio, index):
    x = 4.0
    transition = spheroid(ratio, index, x)
    # reciprocity: the element from wave (n, m) to (n', m) is that from (n', -m) to (n, -m)
    for m, block in transition.blocks.items():
        np.testing.assert_allclose(block, transition.blocks[-m].T, atol=1e-8)
    average = random_orientation(transition)
    finer = random_orientation(spheroid(ratio, index, x, truncation(ratio, x) + 2, 90))
    for name in ("extinction_efficiency", "scattering_efficiency", "asymmetry_parameter"):
        assert getattr(average, name) == pytest.approx(getattr(finer, name), rel=1e-9)
    np.testing.assert_allclose(
        average.scattering_matrix(ANGLES), finer.scattering_matrix(ANGLES), atol=1e-8
    )


def test_matrix_of_all_orders_is_labelled():
    transition = spheroid(2.0, 1.5, 1.0, n_max=3)
    kind, degree, order = transition.labels()
    matrix = transition.full()
    assert matrix.shape == (30, 30)
    row = np.flatnonzero((kind == 1) & (degree == 3) & (order == -2))[0]
    column = np.flatnonzero((kind == 0) & (degree == 2) & (order == -2))[0]
    # block of m = -2: M2 M3 N2 N3
    assert matrix[row, column] == transition.blocks[-2][3, 0] != 0
    assert np.all(matrix[order[:, None] != order] == 0)


def test_identities_of_the_average():
    transition = spheroid(2.0, 1.5 + 0.01j, 3.0)
    average = random_orientation(transition)
    node_deg, weights = gauss_angles(60)
    f11 = average.scattering_matrix(node_deg)[:, 0, 0]
    assert 0.5 * weights @ f11 == pytest.approx(1.0, abs=1e-9)
    forward, back = average.scattering_matrix([0.0, 180.0])
    assert forward[1, 1] == pytest.approx(forward[2, 2], rel=1e-9)
    assert back[1, 1] == pytest.approx(-back[2, 2], rel=1e-9)
    # F44(180) = F11 - 2 F22 (Mishchenko & Hovenier 1995, Opt. Lett. 20, 1356)
    assert back[3, 3] == pytest.approx(back[0, 0] - 2 * back[1, 1], abs=1e-7)


def directions():
    incident = np.array([0.3, -0.5, 0.8]) / np.linalg.norm([0.3, -0.5, 0.8])
    scattered = np.random.default_rng(3).normal(size=(12, 3))
    return incident, scattered / np.linalg.norm(scattered, axis=1, keepdims=True)


def test_amplitudes_turn_with_the_particle():
    incident, scattered = directions()
    transition = spheroid(0.5, 1.5 + 0.01j, 2.0)
    c, s = np.cos(0.7), np.sin(0.7)
    turn = np.array([[c, -s, 0], [s, c, 0], [0, 0, 1]])
    original = amplitude_matrix(transition, incident[None], scattered[None])
    turned = amplitude_matrix(transition, (turn @ incident)[None], (scattered @ turn.T)[None])
    np.testing.assert_allclose(turned, original, rtol=1e-9, atol=1e-12)
    # the mirror plane xz: S3 and S4 change sign
    mirror = np.array([1, -1, 1])
    mirrored = amplitude_matrix(transition, (incident * mirror)[None], (scattered * mirror)[None])
    sign = np.array([1, 1, -1, -1])[:, None, None]
    np.testing.assert_allclose(mirrored, sign * original, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("ratio", [0.5, 2.0])
def test_amplitudes_of_a_fixed_particle_against_dense_dipoles(ratio):
    # Nothing is shared between the two ways but the definition of the scattering
    # plane. 10 cells across and x = 1: dipoles are good to about 2 % of the largest
    # amplitude; a wrong sign or phase of any one would show as 10 % or more.
    index, x = 1.5 + 0.01j, 1.0
    cells = lattice(from_spec({"kind": "spheroid", "equatorial_to_polar": ratio}), 10)
    permittivity = dense.cell_permittivity(cells.fill, cells.normal, index**2)
    alpha = dense.cell_polarizability(permittivity, x, cells.spacing)
    dipoles = dense.DenseLattice(cells.centre(), alpha, x, cells.spacing)
    incident, scattered = directions()
    found = dipoles.amplitude_matrix(incident, scattered)
    exact = amplitude_matrix(spheroid(ratio, index, x), incident[None], scattered[None])[:, 0]
    scale = np.abs(exact).max()
    assert np.abs(exact[2:]).max() > 0.05 * scale
    np.testing.assert_allclose(found, exact, atol=0.02 * scale)


def test_orientation_average_against_dense_dipoles():
    index, x = 1.5 + 0.01j, 1.0
    cells = lattice(from_spec({"kind": "spheroid", "equatorial_to_polar": 2.0}), 10)
    permittivity = dense.cell_permittivity(cells.fill, cells.normal, index**2)
    alpha = dense.cell_polarizability(permittivity, x, cells.spacing)
    dipoles = dense.DenseLattice(cells.centre(), alpha, x, cells.spacing)
    # degree 9 at x = 1: directions leave errors far below those of the cells
    found = dipoles.random_orientation(ANGLES[::4], degree=9, azimuths=12)
    exact = random_orientation(spheroid(2.0, index, x))
    expected = exact.scattering_matrix(ANGLES[::4])
    assert found["extinction_efficiency"] == pytest.approx(exact.extinction_efficiency, rel=0.02)
    # 2 % of F11 at each angle, for every element
    deviation = np.abs(found["scattering_matrix"] - expected) / expected[:, :1, :1]
    assert deviation.max() < 0.02


def test_direction_on_the_axis_is_refused():
    transition = spheroid(2.0, 1.5, 0.5)
    with pytest.raises(ValueError, match="on the particle's axis"):
        amplitude_matrix(transition, [[0.0, 0.0, 1.0]], [[[1.0, 0.0, 0.0]]])
