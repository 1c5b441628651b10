"""Random orientation against exact spheres and spheroids, and against dense dipoles."""

from functools import lru_cache

import numpy as np
import pytest

from lattice_kit import full_root, random_lattice
from oracles import axial, mie
from oracles.dense import DenseLattice
from oracles.mueller import mueller
from scatterloom.orientation.random import averages, mueller_from_products, random_orientation
from scatterloom.orientation.rules import Reach, reach, rule
from scatterloom.transition.level import solve_level
from scatterloom.transition.matrix import TransitionMatrix, efficiencies
from transition_kit import exact_axial, exact_sphere, exact_spheroid, rotated

ANGLES = np.array([0.0, 0.5, 10.0, 37.0, 60.0, 90.0, 123.4, 150.0, 179.0, 180.0])
COSINE = np.cos(np.radians(ANGLES))


def normalized(matrix, transition, x):
    """Mean F11 of 1 over the sphere, by the scattering efficiency from T."""
    _, scattering = efficiencies(transition, x)
    return matrix * 4.0 / (x**2 * scattering)


@pytest.mark.parametrize("index", [1.33, 1.5 + 0.01j, 1.75 + 0.44j])
@pytest.mark.parametrize("x", [0.2, 1.0, 4.0])
def test_spheres(index, x):
    exact = mie.sphere(index, x, n_max=14).scattering_matrix(ANGLES)
    transition = exact_sphere(index, x, 14)
    for symmetry in ("sphere", "axial"):
        found = normalized(random_orientation(transition, symmetry, COSINE), transition, x)
        np.testing.assert_allclose(found, exact, atol=1e-10 * exact[:, 0, 0].max())


def test_unnormalized_matrix_is_the_differential_cross_section():
    # k^2 dC/dOmega = (|S1|^2 + |S2|^2)/2 (Bohren & Huffman 1983, eq. 4.77)
    transition = exact_sphere(1.5 + 0.01j, 2.0, 12)
    s1, s2 = mie.sphere(1.5 + 0.01j, 2.0, n_max=12).amplitudes(ANGLES)
    found = random_orientation(transition, "sphere", COSINE)
    np.testing.assert_allclose(found[:, 0, 0], (abs(s1) ** 2 + abs(s2) ** 2) / 2, rtol=1e-10)


SPHEROIDS = [(2.0, 1.5 + 0.01j, 1.5), (0.5, 1.5 + 0.01j, 1.5), (1.5, 1.6 + 0.2j, 2.0)]


@lru_cache(maxsize=8)
def expected(case):
    return axial.random_orientation(exact_axial(*case))


@pytest.mark.parametrize("case", SPHEROIDS, ids=str)
def test_spheroids(case):
    transition = exact_spheroid(*case)
    exact = expected(case).scattering_matrix(ANGLES)
    # the oracle leaves out elements of T below 1e-10
    found = normalized(random_orientation(transition, "axial", COSINE), transition, case[2])
    np.testing.assert_allclose(found, exact, atol=1e-9)
    assert not found[:, :2, 2:].any() and not found[:, 2:, :2].any()


@pytest.mark.parametrize("symmetry", ["mirrors", "none"])
def test_more_general_rules_give_the_same(symmetry):
    case = SPHEROIDS[0]
    transition = exact_spheroid(*case, 7)
    special = random_orientation(transition, "axial", COSINE)
    general = random_orientation(transition, symmetry, COSINE)
    # all sixteen elements, those that vanish too; both averages are exact, the integrand
    # being of degree 28 (rules of half that degree err by 2e-7 here)
    np.testing.assert_allclose(general, special, atol=1e-12 * special.max())


def test_rotating_the_particle_changes_nothing():
    case = SPHEROIDS[1]
    transition = exact_spheroid(*case, 7)
    special = random_orientation(transition, "axial", COSINE)
    turned = rotated(transition, 0.7, 1.1, -0.4)
    assert np.abs(turned.matrix - transition.matrix).max() > 0.05
    general = random_orientation(turned, "none", COSINE)
    np.testing.assert_allclose(general, special, atol=1e-12 * special.max())


@pytest.mark.parametrize("mirrors", [(False, False, False), (True, True, True)])
def test_lattice_of_any_form_against_dense_plane_waves(mirrors):
    # The averages of plane-wave solutions, incidence by incidence, far fields summed over
    # the cells, with no waves, no T and no projection on the other side. A random heap of
    # cells has no symmetry: all sixteen elements are at work.
    box = (4, 3, 5) if not mirrors[0] else (4, 4, 4)
    cells = random_lattice(box, mirrors, seed=6)
    index, x = 1.7 + 0.1j, 1.6
    kd = x * cells.spacing
    level = solve_level(cells, index, x, 8, 1e-9, dtype=np.complex128)
    assert level.solution.converged
    root = full_root(cells, index, kd)
    dense = DenseLattice(x * cells.centre(), root @ root, 1.0, kd, radius=x)
    exact = dense.random_orientation(ANGLES[1:-1], degree=15, azimuths=16)
    extinction, _ = efficiencies(level.transition, x)
    # rules of the oracle exact to degree 15, waves of degree 8 for a reach of 1.4
    assert extinction == pytest.approx(exact["extinction_efficiency"], rel=1e-7)
    assert level.absorption_efficiency == pytest.approx(exact["absorption_efficiency"], rel=1e-5)
    matrix = random_orientation(level.transition, "mirrors" if mirrors[0] else "none", COSINE)
    matrix = normalized(matrix, level.transition, x)[1:-1]
    np.testing.assert_allclose(matrix, exact["scattering_matrix"], atol=1e-6)
    beside = exact["scattering_matrix"][:, :2, 2:]
    # the heap without mirror planes is handed
    assert (np.abs(beside).max() > 1e-4) == (not mirrors[0])


def test_mueller_matrix_of_random_amplitudes():
    rng = np.random.default_rng(5)
    amplitudes = rng.normal(size=(6, 2, 2)) + 1j * rng.normal(size=(6, 2, 2))
    products = np.einsum("apq,ars->apqrs", amplitudes, amplitudes.conj())
    s2, s3, s4, s1 = (amplitudes[:, p, q] for p, q in ((0, 0), (0, 1), (1, 0), (1, 1)))
    np.testing.assert_allclose(mueller_from_products(products), mueller(s1, s2, s3, s4), atol=1e-14)


@pytest.mark.parametrize("symmetry", ["axial", "mirrors", "none"])
def test_in_parts_and_at_once(symmetry, monkeypatch):
    transition = exact_spheroid(*SPHEROIDS[0], 5)
    whole = random_orientation(transition, symmetry, COSINE)
    monkeypatch.setattr("scatterloom.orientation.random._MOST_SAMPLES", 2000)
    parts = random_orientation(transition, symmetry, COSINE)
    np.testing.assert_allclose(parts, whole, atol=1e-13 * whole.max())


@pytest.mark.parametrize("symmetry", ["axial", "none"])
def test_combinations_are_averages_of_the_combined_matrix(symmetry):
    one, other = (exact_spheroid(ratio, 1.5 + 0.01j, 1.5, 6) for ratio in (2.0, 1.4))
    stack = np.stack([one.matrix, other.matrix])
    weights = np.array([[1.0, 0.0], [-0.5, 1.5], [0.3, 0.4]])
    at = rule(symmetry, reach(stack, one.labels))
    found = averages(stack, one.labels, weights, at, COSINE)
    for matrix, (a, b) in zip(found, weights, strict=True):
        combined = TransitionMatrix(a * one.matrix + b * other.matrix, one.labels)
        expected = random_orientation(combined, symmetry, COSINE)
        np.testing.assert_allclose(matrix, expected, atol=1e-13 * expected.max())


@pytest.mark.parametrize("symmetry", ["axial", "mirrors", "none"])
def test_what_is_negligible_is_bounded(symmetry):
    # Half the polar angles and less, an error below the products left out.
    case = SPHEROIDS[0]
    transition = exact_spheroid(*case, 10)
    if symmetry == "none":
        transition = rotated(transition, 0.7, 1.1, -0.4)
    exact = random_orientation(transition, symmetry, COSINE)
    limits = reach(transition.matrix[None], transition.labels, 1e-9)
    at = rule(symmetry, limits)
    assert at.beta.size < 0.6 * rule(symmetry, Reach(40, 20)).beta.size
    stack, one = transition.matrix[None], np.ones((1, 1))
    (short,) = averages(stack, transition.labels, one, at, COSINE)
    error = np.abs(short - exact).max() / exact[:, 0, 0].max()
    assert 0.0 < error < 1e-9
