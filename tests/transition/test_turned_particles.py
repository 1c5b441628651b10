"""Transition matrices of turned particles, and lattices turned against their particle."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from lattice_kit import OBLATE, TRIAXIAL, of_shape
from oracles import rayleigh
from scatterloom.orientation.random import random_orientation
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.transition.level import solve_level
from scatterloom.transition.matrix import efficiencies
from scatterloom.transition.rotate import euler_angles, turned
from scatterloom.waves.basis import complex_from_real, wave_basis
from transition_kit import distance, exact_sphere, exact_spheroid, rotated

ANGLES = st.tuples(
    st.floats(-math.pi, math.pi), st.floats(0.0, math.pi), st.floats(-math.pi, math.pi)
)
TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()
INDEX = 1.5 + 0.01j


@settings(max_examples=100, deadline=None)
@given(ANGLES)
def test_euler_angles_make_the_rotation_again(angles):
    matrix = Rotation.from_euler("ZYZ", angles).as_matrix()
    again = Rotation.from_euler("ZYZ", euler_angles(matrix)).as_matrix()
    np.testing.assert_allclose(again, matrix, atol=1e-9)


@pytest.mark.parametrize("angles", [(0.4, 0.0, 0.3), (0.4, math.pi, 0.3), (0.0, 0.0, 0.0)])
def test_euler_angles_at_the_poles(angles):
    matrix = Rotation.from_euler("ZYZ", angles).as_matrix()
    again = Rotation.from_euler("ZYZ", euler_angles(matrix)).as_matrix()
    np.testing.assert_allclose(again, matrix, atol=1e-14)


def test_turned_as_by_euler_angles():
    spheroid = exact_spheroid(2.0, INDEX, 1.0, 4)
    matrix = Rotation.from_euler("ZYZ", (0.4, 1.1, -0.7)).as_matrix()
    expected = rotated(spheroid, 0.4, 1.1, -0.7)
    assert distance(turned(spheroid, matrix), expected) < 1e-12


def test_turning_back_and_in_steps():
    spheroid = exact_spheroid(2.0, INDEX, 1.0, 4)
    first = Rotation.from_rotvec([0.2, -1.0, 0.4]).as_matrix()
    there = turned(spheroid, first)
    assert distance(there, spheroid) > 0.05
    assert distance(turned(there, first.T), spheroid) < 1e-12
    assert distance(turned(there, TURN), turned(spheroid, TURN @ first)) < 1e-12
    about_axis = Rotation.from_rotvec([0, 0, 0.9]).as_matrix()
    assert distance(turned(spheroid, about_axis), spheroid) < 1e-12
    ball = exact_sphere(INDEX, 1.0, 4)
    assert distance(turned(ball, TURN), ball) < 1e-12


def test_turned_small_particle_has_the_turned_polarizability():
    """N waves of degree 1 in real form are the axes: T = i (2/3) x^3 alpha/(4 pi), alpha a tensor.

    Independent of all rotation formulas: R alpha R^T with the closed form for ellipsoids.
    """
    x = 0.02
    shape = from_spec(TRIAXIAL)
    alpha = np.diag(rayleigh.polarizabilities(shape.half_axes, INDEX))
    change, labels = complex_from_real(1)
    basis = wave_basis(1)
    places = [
        int(np.flatnonzero((basis.kind == 1) & (basis.order == o) & (basis.sine == s))[0])
        for o, s in ((1, 0), (1, 1), (0, 0))
    ]
    level = solve_level(lattice(shape, 12), INDEX, x, 1, 1e-6)
    assert level.transition.labels.n_max == labels.n_max
    real = change.conj().T @ turned(level.transition, TURN).matrix @ change
    found = real[np.ix_(places, places)] / (2j / 9 * x**3)
    np.testing.assert_allclose(found, TURN @ alpha @ TURN.T, atol=0.01 * np.abs(alpha).max())


@pytest.mark.parametrize("offset", [None, (0.3, 0.1, 0.7)])
def test_lattice_turned_against_the_particle(offset):
    """Matrix in the particle's frame: that of the aligned lattice, up to the lattices' errors.

    12 cells across err by 1 % of T at this size (see test_lattice_levels), most of it alike.
    """
    shape = from_spec(TRIAXIAL)
    plain = solve_level(lattice(shape, 12), INDEX, 1.0, 4, 1e-5)
    other = solve_level(lattice(shape, 12, TURN, offset), INDEX, 1.0, 4, 1e-5)
    assert distance(other.transition, plain.transition) < 5e-3
    assert distance(turned(other.transition, TURN), plain.transition) > 0.1
    assert other.absorption_efficiency == pytest.approx(plain.absorption_efficiency, rel=5e-3)


def test_random_orientation_from_a_turned_lattice():
    """d^2 through 8 and 12 cells on turned lattices against the exact spheroid: 0.5 %, 1 %."""
    x, n_max = 1.0, 6
    exact = exact_spheroid(2.0, INDEX, x, n_max)
    levels = [
        solve_level(lattice(from_spec(OBLATE), n, TURN, (0.2, 0.4, 0.1)), INDEX, x, n_max, 1e-5)
        for n in (8, 12)
    ]
    coarse, fine = (level.transition for level in levels)
    best = type(fine)(fine.matrix + (fine.matrix - coarse.matrix) * 64 / 80, fine.labels)
    # projected on the spheroid's symmetry in its own frame
    assert all(level.asymmetry < 0.02 for level in levels)
    assert distance(best, exact) < 3e-3
    for found, expected in zip(efficiencies(best, x), efficiencies(exact, x), strict=True):
        assert found == pytest.approx(expected, rel=5e-3)
    cosine = np.cos(np.radians(np.arange(0.0, 181.0, 20.0)))
    ours, theirs = (random_orientation(t, "axial", cosine) for t in (best, exact))
    np.testing.assert_allclose(ours[:, 0, 0], theirs[:, 0, 0], rtol=0.01)
    np.testing.assert_allclose(ours / ours[:, :1, :1], theirs / theirs[:, :1, :1], atol=2e-3)


def test_aligned_lattice_is_not_touched():
    """No rotation given and a rotation by nothing: the same particle, one way or the other."""
    plain = solve_level(of_shape(OBLATE, 8), INDEX, 1.0, 4, 1e-6)
    given = solve_level(lattice(from_spec(OBLATE), 8, np.eye(3)), INDEX, 1.0, 4, 1e-6)
    assert distance(given.transition, plain.transition) < 1e-12
