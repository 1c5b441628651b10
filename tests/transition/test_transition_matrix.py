"""Projection, truncation and efficiencies of transition matrices."""

import numpy as np
import pytest

from oracles import axial, mie
from scatterloom.transition.matrix import TransitionMatrix, efficiencies, from_amplitudes, project
from scatterloom.waves.basis import complex_from_real, wave_basis
from transition_kit import distance, exact_axial, exact_sphere, exact_spheroid, rotated

RNG = np.random.default_rng(21)


def random_matrix(n_max):
    _, labels = complex_from_real(n_max)
    size = len(labels.kind)
    return TransitionMatrix(
        RNG.normal(size=(size, size)) + 1j * RNG.normal(size=(size, size)), labels
    )


@pytest.mark.parametrize("index", [1.33, 1.5 + 0.01j, 2.0 + 0.5j])
@pytest.mark.parametrize("x", [0.3, 3.0])
def test_efficiencies_of_an_exact_sphere(index, x):
    ball = mie.sphere(index, x, n_max=14)
    extinction, scattering = efficiencies(exact_sphere(index, x, 14), x)
    # rounding of 14-term sums
    assert extinction == pytest.approx(ball.extinction_efficiency, rel=1e-12)
    assert scattering == pytest.approx(ball.scattering_efficiency, rel=1e-12)


@pytest.mark.parametrize("ratio", [2.0, 0.5])
def test_efficiencies_of_an_exact_spheroid(ratio):
    x, index = 1.5, 1.5 + 0.02j
    average = axial.random_orientation(exact_axial(ratio, index, x))
    exact = exact_spheroid(ratio, index, x)
    for transition in (exact, rotated(exact, 0.4, 1.1, 2.5)):
        extinction, scattering = efficiencies(transition, x)
        assert extinction == pytest.approx(average.extinction_efficiency, rel=1e-11)
        assert scattering == pytest.approx(average.scattering_efficiency, rel=1e-11)


@pytest.mark.parametrize("symmetry", ["sphere", "axial", "mirrors", "none"])
def test_projection_is_orthogonal_and_idempotent(symmetry):
    raw = random_matrix(4)
    once = project(raw, symmetry)
    np.testing.assert_allclose(project(once, symmetry).matrix, once.matrix, atol=1e-14)
    # what is taken away is orthogonal to what is left
    away = raw.matrix - once.matrix
    assert abs(np.vdot(once.matrix, away)) < 1e-12 * np.linalg.norm(raw.matrix) ** 2
    share = np.linalg.norm(away) / np.linalg.norm(raw.matrix)
    assert (share == 0.0) == (symmetry in ("mirrors", "none"))


def test_projected_matrices_do_not_change_by_rotation():
    ball, top = project(random_matrix(3), "sphere"), project(random_matrix(3), "axial")
    assert distance(rotated(ball, 0.3, 1.2, -2.0), ball) < 1e-13
    assert distance(rotated(top, 0.9, 0.0, 0.4), top) < 1e-13
    assert distance(rotated(top, 0.0, 0.4, 0.0), top) > 0.1


@pytest.mark.parametrize("symmetry", ["sphere", "axial"])
def test_projection_keeps_the_exact_matrix_and_never_leads_away_from_it(symmetry):
    exact = exact_sphere(1.5, 2.0, 5) if symmetry == "sphere" else exact_spheroid(2.0, 1.5, 1.0, 5)
    assert distance(project(exact, symmetry), exact) < 1e-15
    for size in (1e-3, 1.0):
        noise = random_matrix(5).matrix * size
        disturbed = TransitionMatrix(exact.matrix + noise, exact.labels)
        assert distance(project(disturbed, symmetry), exact) < distance(disturbed, exact)


def test_unknown_symmetry_is_refused():
    with pytest.raises(ValueError, match="unknown symmetry 'cube'"):
        project(random_matrix(1), "cube")


def test_a_cut_keeps_the_lower_degrees():
    whole = exact_spheroid(0.5, 1.4, 1.0, 6)
    short = whole.cut(4)
    low = whole.labels.degree <= 4
    kept = short.matrix[np.ix_(low, low)]
    np.testing.assert_array_equal(kept, exact_spheroid(0.5, 1.4, 1.0, 4).matrix)
    assert not short.matrix[~low].any() and not short.matrix[:, ~low].any()
    np.testing.assert_array_equal(whole.cut(6).matrix, whole.matrix)


def test_symmetric_amplitudes_are_reciprocal():
    # Reciprocity in complex waves (Mishchenko et al. 2002, eq. 5.34): exchanging row and
    # column reverses the orders, T_(m kn, m' k'n') = (-1)^(m + m') T_(-m' k'n', -m kn).
    n_max = 3
    size = len(wave_basis(n_max))
    members = [np.arange(0, size, 2), np.arange(1, size, 2)]
    blocks = [RNG.normal(size=(len(m), len(m))) + 1j for m in members]
    found = from_amplitudes(n_max, members, [block + block.T for block in blocks])
    labels = found.labels
    place = {
        key: i for i, key in enumerate(zip(labels.kind, labels.degree, labels.order, strict=True))
    }
    reverse = [place[k, n, -m] for k, n, m in place]
    sign = (-1.0) ** labels.order
    reversed_matrix = sign[:, None] * found.matrix[np.ix_(reverse, reverse)].T * sign
    np.testing.assert_allclose(found.matrix, reversed_matrix, atol=1e-13)
    assert np.abs(found.matrix).max() > 1.0
