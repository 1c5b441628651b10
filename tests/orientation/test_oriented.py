"""Oriented particles: against random orientation, against dipoles in closed form."""

import math

import numpy as np
import pytest

from oracles import rayleigh
from oracles.mueller import mueller
from scatterloom.orientation.distribution import (
    Directions,
    fisher_tilt,
    listed,
    normal_tilt,
    uniform_tilt,
)
from scatterloom.orientation.oriented import Views, oriented
from scatterloom.orientation.random import random_orientation
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.transition.level import solve_level
from scatterloom.transition.matrix import efficiencies
from transition_kit import exact_sphere, exact_spheroid, rotated

INDEX = 1.5 + 0.01j
ONE = np.ones((1, 1))
SPHEROID = exact_spheroid(2.0, INDEX, 1.5, 7)
HEAP = rotated(SPHEROID, 0.7, 1.1, -0.4)  # no symmetry about its own z axis
VIEWS = Views(
    np.radians([0.0, 35.0, 120.0]),
    np.radians([0.0, 20.0, 75.0, 131.0, 180.0]),
    np.radians([0.0, 50.0, 180.0, 300.0]),
)


def averages(transition, symmetry, distribution, views=VIEWS):
    found = oriented(transition.matrix[None], transition.labels, ONE, symmetry, distribution, views)
    return found.phase[0], found.extinction[0]


def directions(zenith, azimuth):
    """Unit vectors along r, theta, phi."""
    st, ct, sp, cp = np.sin(zenith), np.cos(zenith), np.sin(azimuth), np.cos(azimuth)
    return (
        np.array([st * cp, st * sp, ct]),
        np.array([ct * cp, ct * sp, -st]),
        np.array([-sp, cp, 0.0]),
    )


def turned_stokes(angle):
    """Stokes vector referred to other axes, e_par' = cos(angle) e_par + sin(angle) e_per.

    Bohren & Huffman 1983, section 2.11.
    """
    c, s = math.cos(2 * angle), math.sin(2 * angle)
    return np.array([[1, 0, 0, 0], [0, c, s, 0], [0, -s, c, 0], [0, 0, 0, 1.0]])


@pytest.mark.parametrize(
    ("transition", "symmetry"),
    [(SPHEROID, "axial"), (SPHEROID, "mirrors"), (SPHEROID, "none"), (HEAP, "none")],
)
def test_axes_spread_over_the_whole_sphere_are_random_orientation(transition, symmetry):
    phase, extinction = averages(transition, symmetry, uniform_tilt(180.0, 28))
    total, _ = efficiencies(SPHEROID, 1.5)
    for i, incidence in enumerate(VIEWS.incidence):
        # C_ext k^2 = pi x^2 Q on the diagonal, nothing off it: no direction is preferred
        np.testing.assert_allclose(
            extinction[i], np.eye(4) * math.pi * 1.5**2 * total, atol=1e-12 * total
        )
        lit = directions(incidence, 0.0)
        for z, zenith in enumerate(VIEWS.zenith):
            for a, azimuth in enumerate(VIEWS.azimuth):
                seen = directions(zenith, azimuth)
                cosine = float(lit[0] @ seen[0])
                matrix = random_orientation(SPHEROID, "axial", np.array([cosine]))[0]
                normal = np.cross(lit[0], seen[0])
                if np.linalg.norm(normal) < 1e-9:
                    continue  # no scattering plane to turn to
                normal /= np.linalg.norm(normal)
                # e_per of Bohren & Huffman is against the normal of the scattering plane, and
                # against phi in a meridional plane.
                into = math.atan2(normal @ lit[1], normal @ lit[2])
                out = math.atan2(normal @ seen[1], normal @ seen[2])
                expected = turned_stokes(-out) @ matrix @ turned_stokes(into)
                # products of 1e-9 are left out of turns about the axis
                scale = 1e-8 * matrix[0, 0] if symmetry == "none" else 1e-11
                np.testing.assert_allclose(phase[i, z, a], expected, atol=scale)


@pytest.mark.parametrize("distribution", ["list", "normal", "fisher"])
def test_a_sphere_does_not_care(distribution):
    ball = exact_sphere(INDEX, 2.0, 9)
    spread = {
        "list": listed([[10.0, 40.0, 70.0], [200.0, 90.0, 0.0]], [1.0, 3.0]),
        "normal": normal_tilt(20.0, 36),
        "fisher": fisher_tilt(3.0, 36),
    }[distribution]
    phase, extinction = averages(ball, "sphere", spread)
    same, _ = averages(ball, "sphere", uniform_tilt(180.0, 36))
    np.testing.assert_allclose(phase, same, atol=1e-12 * same.max())
    np.testing.assert_allclose(extinction[..., 0, 1:], 0.0, atol=1e-12 * extinction.max())


def test_tilts_are_the_mean_of_single_orientations():
    # The sums over orders against plain quadrature over azimuth and turn, no symmetry used.
    beta = np.radians([25.0, 70.0])
    low = exact_spheroid(2.0, INDEX, 0.8, 3)
    heap = rotated(low, 0.7, 1.1, -0.4)
    steps = np.arange(13) * 2 * math.pi / 13  # exact for products of degree 12 = 4 n_max
    euler = [(a, b, g) for b in beta for a in steps for g in steps]
    single = Directions(np.array(euler), np.full(len(euler), 1.0 / len(euler)))
    tilts = type(normal_tilt(5.0, 2))(beta, np.array([0.5, 0.5]))
    views = Views(np.radians([50.0]), np.radians([30.0, 110.0]), np.radians([0.0, 70.0, 200.0]))
    expected, straight = averages(heap, "none", single, views)
    phase, extinction = averages(heap, "none", tilts, views)
    np.testing.assert_allclose(phase, expected, atol=1e-8 * expected.max())
    np.testing.assert_allclose(extinction, straight, atol=1e-12 * straight.max())
    assert np.abs(phase[..., :2, 2:]).max() > 1e-3 * phase.max()  # sixteen elements are at work


def dipole(alpha, incidence, zenith, azimuth):
    """Amplitudes times k of a dipole with polarizability tensor alpha [k^-3], theta and -phi."""
    lit, seen = directions(incidence, 0.0), directions(zenith, azimuth)
    into = np.stack([lit[1], -lit[2]], axis=1)
    out = np.stack([seen[1], -seen[2]])
    return out @ alpha @ into


def test_small_ellipsoids_at_single_orientations():
    """Bohren & Huffman 1983, section 5.7 (ellipsoids much smaller than the wavelength)."""
    x = 0.02
    shape = from_spec({"kind": "ellipsoid", "axes": [1.5, 1.0, 0.7]})
    level = solve_level(lattice(shape, 24), INDEX, x, 1, 1e-7, dtype=np.complex128)
    own = np.diag(rayleigh.polarizabilities(shape.half_axes, INDEX)) * x**3 / 3
    angles = np.radians([30.0, 50.0, 20.0])
    phase, extinction = averages(level.transition, "mirrors", listed([np.degrees(angles)], [1.0]))
    c, s = np.cos(angles), np.sin(angles)
    about_z = [np.array([[c[i], -s[i], 0], [s[i], c[i], 0], [0, 0, 1]]) for i in (0, 2)]
    tilt = np.array([[c[1], 0, s[1]], [0, 1, 0], [-s[1], 0, c[1]]])
    turn = about_z[0] @ tilt @ about_z[1]
    alpha = turn @ own @ turn.T
    for i, incidence in enumerate(VIEWS.incidence):
        for z, zenith in enumerate(VIEWS.zenith):
            for a, azimuth in enumerate(VIEWS.azimuth):
                f = dipole(alpha, incidence, zenith, azimuth)
                expected = mueller(f[1, 1], f[0, 0], f[0, 1], f[1, 0])
                # The lattice has 24 cells across: polarizabilities are right to 1 %; the size
                # parameter is small enough for 1e-3.
                np.testing.assert_allclose(
                    phase[i, z, a], expected, atol=0.02 * abs(alpha).max() ** 2
                )
        # Absorption dominates: extinction is linear in the imaginary parts.
        f = dipole(alpha, incidence, incidence, 0.0)
        k11 = 2 * math.pi * (f[0, 0] + f[1, 1]).imag
        k12 = 2 * math.pi * (f[0, 0] - f[1, 1]).imag
        k13 = 2 * math.pi * (f[0, 1] + f[1, 0]).imag
        k34 = 2 * math.pi * (f[1, 1] - f[0, 0]).real
        size = 4 * math.pi * abs(alpha).max()
        np.testing.assert_allclose(extinction[i, 0, :3], [k11, k12, k13], atol=0.02 * k11)
        np.testing.assert_allclose(extinction[i, 2, 3], k34, atol=0.02 * size)


@pytest.mark.parametrize("sd_deg", [3.0, 25.0])
def test_normal_tilts_of_small_spheroids(sd_deg):
    """Mean of alpha over azimuth and tilt: along z a_z <cos^2> + a_x <sin^2>, and so on."""
    x = 0.02
    spheroid = exact_spheroid(2.0, INDEX, x, 2)
    tilts = normal_tilt(sd_deg, 8)
    beta = np.linspace(0.0, math.pi, 200_001)
    density = np.exp(-0.5 * (beta / math.radians(sd_deg)) ** 2) * np.sin(beta)
    square = float(density @ np.cos(beta) ** 2 / density.sum())
    assert tilts.weight @ np.cos(tilts.beta) ** 2 == pytest.approx(square, abs=1e-9)
    shape = from_spec({"kind": "spheroid", "equatorial_to_polar": 2.0})
    across, _, along = rayleigh.polarizabilities(shape.half_axes, INDEX) * x**3 / 3
    upright = along * square + across * (1 - square)
    level = along * (1 - square) / 2 + across * (1 + square) / 2
    views = Views(np.radians([90.0]), np.radians([90.0]), np.zeros(1))
    _, extinction = averages(spheroid, "axial", tilts, views)
    # Light along the horizon: theta is vertical. Terms of order x^2 are left out.
    k11 = 2 * math.pi * (upright + level).imag
    k12 = 2 * math.pi * (upright - level).imag
    np.testing.assert_allclose(extinction[0, 0, :2], [k11, k12], rtol=2e-3)


def test_the_optical_theorem_for_a_list():
    # What a lossless particle takes from the beam it scatters, at every orientation and
    # polarization: the phase matrix over the sphere is the extinction row (Stokes I).
    clear = exact_spheroid(2.0, 1.5, 1.2, 6)
    node, weight = np.polynomial.legendre.leggauss(14)
    azimuth = np.arange(26) * 2 * math.pi / 26
    views = Views(np.radians([40.0]), np.arccos(node), azimuth)
    phase, extinction = averages(clear, "axial", listed([[15.0, 65.0, 0.0]], [1.0]), views)
    scattered = np.einsum("z,zaj->j", weight, phase[0, :, :, 0]) * 2 * math.pi / azimuth.size
    np.testing.assert_allclose(scattered, extinction[0, 0], atol=1e-6 * extinction[0, 0, 0])


def test_fisher_and_uniform_tilts_have_their_means():
    # <cos beta> = coth k - 1/k (Fisher 1953, from memory), (1 + cos b)/2 for a cap.
    for kappa in (0.5, 5.0, 200.0):
        tilts = fisher_tilt(kappa, 20)
        mean = 1 / math.tanh(kappa) - 1 / kappa
        assert tilts.weight @ np.cos(tilts.beta) == pytest.approx(mean, abs=1e-9)
    cap = uniform_tilt(30.0, 20)
    expected = (1 + math.cos(math.radians(30.0))) / 2
    assert cap.weight @ np.cos(cap.beta) == pytest.approx(expected, rel=1e-13)
