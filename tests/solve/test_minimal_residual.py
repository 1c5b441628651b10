"""One parity class: invariants of the iteration and the order of the amplitudes' error."""

import numpy as np
import pytest

from lattice_kit import SPHERE
from scatterloom.solve.minimal_residual import ClassIterate, gram, significant_rows
from wave_problems import problem

RNG = np.random.default_rng(12)


def random_block(rows, columns):
    return RNG.normal(size=(rows, columns)) + 1j * RNG.normal(size=(rows, columns))


@pytest.fixture(scope="module")
def system():
    """A small complex symmetric A = 1 - K with |K| about 0.5, and a block of rows B."""
    size = 60
    k = random_block(size, size)
    k = k + k.T
    k *= 0.5 / np.linalg.norm(k, 2)
    return np.eye(size) - k, random_block(7, size)


def test_significant_rows_are_orthonormal_and_complete():
    block = random_block(6, 30) * np.array([10, 1, 1, 0.1, 1e-3, 1e-4])[:, None]
    combine = significant_rows(gram(block), 1e-4)
    directions = combine @ block
    np.testing.assert_allclose(directions @ directions.conj().T, np.eye(len(combine)), atol=1e-12)
    # what is left has no direction above the threshold
    rest = block - (block @ directions.conj().T) @ directions
    assert np.linalg.norm(rest, 2) ** 2 <= 1e-4
    assert 0 < len(combine) < 6
    assert len(significant_rows(gram(block), 1e9)) == 0
    assert len(significant_rows(gram(np.zeros((3, 5), complex)), 0.0)) == 0


def test_invariants_hold_at_every_step(system):
    a, b = system
    iterate = ClassIterate(b)
    kept = b.copy()
    before = np.linalg.norm(b)
    for _ in range(4):
        directions = iterate.propose(1e-12)
        iterate.take(directions, directions @ a.T)
        # R = B - A X
        np.testing.assert_allclose(iterate.residual, b - iterate.fields @ a.T, atol=1e-13 * before)
        # R orthogonal to all images used
        for images in iterate._images:
            np.testing.assert_allclose(iterate.residual @ images.conj().T, 0.0, atol=1e-12)
        now = np.linalg.norm(iterate.residual)
        assert now < 0.7 * before
        assert iterate.relative_residual() == pytest.approx(now / np.linalg.norm(b))
        before = now
    np.testing.assert_array_equal(b, kept)
    iterate.release()
    assert not iterate._images and not iterate._directions


def test_the_residual_is_the_least_possible(system):
    # Minimal residuals over the span of directions: compare with numpy's least squares.
    a, b = system
    iterate = ClassIterate(b)
    used = []
    for _ in range(2):
        directions = iterate.propose(1e-12)
        used.append(directions)
        iterate.take(directions, directions @ a.T)
    span = np.concatenate(used) @ a.T
    coefficients, *_ = np.linalg.lstsq(span.T, b.T, rcond=None)
    least = b - (span.T @ coefficients).T
    np.testing.assert_allclose(iterate.residual, least, atol=1e-11)


def test_dependent_images_add_nothing(system):
    a, b = system
    iterate = ClassIterate(b)
    v = iterate.propose(1e-12)
    twice = np.concatenate([v, v[:2]])
    iterate.take(twice, twice @ a.T)
    once = ClassIterate(b)
    once.admit(1e-12)
    once.take(v, v @ a.T)
    assert len(iterate._images[0]) == len(v)
    np.testing.assert_allclose(iterate.fields, once.fields, atol=1e-12)
    iterate.take(v[:0], v[:0])
    np.testing.assert_allclose(iterate.residual, once.residual, atol=1e-12)


def test_errors_of_amplitudes_are_of_second_order(system):
    # Stationary form: fields off by e give amplitudes off by e^2; with R^T R added
    # still e^2, with a smaller factor, for A near one. B^T X alone is off by e.
    a, b = system
    exact_fields = np.linalg.solve(a, b.T).T
    exact = b @ exact_fields.T
    direction = random_block(*b.shape)
    eps = 1e-3 * 2.0 ** np.arange(6)
    errors = {"plain": [], "stationary": [], "corrected": []}
    for e in eps:
        # The best fields within a span that misses the exact ones by e.
        iterate = ClassIterate(b)
        iterate.admit(0.0)
        tried = exact_fields + e * direction
        iterate.take(tried, tried @ a.T)
        stationary, remainder = iterate.amplitudes()
        errors["plain"].append(np.linalg.norm(b @ iterate.fields.T - exact))
        errors["stationary"].append(np.linalg.norm(stationary - exact))
        errors["corrected"].append(np.linalg.norm(stationary + remainder - exact))
    slopes = {k: np.polyfit(np.log(eps), np.log(v), 1)[0] for k, v in errors.items()}
    assert slopes["plain"] == pytest.approx(1.0, abs=0.01)
    assert slopes["stationary"] == pytest.approx(2.0, abs=0.01)
    assert slopes["corrected"] == pytest.approx(2.0, abs=0.01)
    assert np.all(np.array(errors["corrected"]) < 0.7 * np.array(errors["stationary"]))


def test_rows_admitted_late_meet_the_invariants(system):
    # Strong rows first; the others join after two steps and must fit what was done before.
    a, b = system
    b = b * np.array([1, 1, 1, 0.1, 0.1, 0.01, 0.01])[:, None]
    scale = np.linalg.norm(b)
    iterate = ClassIterate(b)
    for threshold in (10.0, 10.0, 1e-12, 1e-12):
        directions = iterate.propose(threshold)
        if threshold == 10.0:
            assert iterate.strong == 3
        iterate.take(directions, directions @ a.T)
        np.testing.assert_allclose(iterate.residual, b - iterate.fields @ a.T, atol=1e-13 * scale)
    assert iterate.strong == 7
    for images in iterate._images:
        np.testing.assert_allclose(iterate.residual @ images.conj().T, 0.0, atol=1e-12)


def test_weak_rows_enter_the_amplitudes_to_first_order(system):
    # Rows of norm w without a solve of their own: their amplitudes with the others are off by
    # w times the residual, those among themselves by w^2 |A^-1 - 1|.
    a, b = system
    weight = 1e-4
    b = b * np.where(np.arange(7) < 4, 1.0, weight)[:, None]
    exact = b @ np.linalg.solve(a, b.T)
    iterate = ClassIterate(b)
    for _ in range(12):
        directions = iterate.propose(1e-5)
        iterate.take(directions, directions @ a.T)
    assert iterate.strong == 4
    stationary, remainder = iterate.amplitudes()
    off = np.abs(stationary + remainder - exact)
    rest = np.linalg.norm(iterate.residual[:4])
    weak = np.linalg.norm(b[4:])
    # |A^-1| <= 2, |A^-1 - 1| <= 1
    assert off[4:, :4].max() <= 1.1 * weak * rest + 1e-13
    assert off[4:, 4:].max() <= 1.1 * weak**2 + 1e-13
    assert np.linalg.norm(remainder) == pytest.approx(iterate.remainder_norm(), rel=1e-9)
    whole = np.linalg.norm(iterate.residual @ iterate.residual.T)
    assert iterate.remainder_norm(iterate.across_norm()) == pytest.approx(whole, rel=1e-9)
    assert whole <= iterate.remainder_norm(iterate.across_bound()) < 10.0 * whole
    np.testing.assert_allclose(iterate.residual, b - iterate.fields @ a.T, atol=1e-12)
    expected = iterate.fields + iterate.residual
    np.testing.assert_allclose(iterate.corrected_fields(), expected, atol=1e-12)


def test_recursive_and_true_residual_agree_in_single_precision():
    # The amplitudes trust R = B - A X to first order, so it must hold to the rounding of
    # single precision (6e-8 times a few per step), whatever R itself has fallen to.
    case = problem(SPHERE, 6, 1.5 + 0.01j, 1.5, 5)
    single, double = case.matrix(np.complex64), case.matrix(np.complex128)
    rows = case.incident(single).rows
    exact_rows = case.incident(double).rows
    for c, block in enumerate(rows):
        iterate = ClassIterate(block)
        for _ in range(4):
            v = iterate.propose(1e-9)
            packed = np.zeros((8, len(v), 3, single.n_cell), np.complex64)
            packed[c] = v.reshape(len(v), 3, single.n_cell)
            iterate.take(v, single(packed)[c].reshape(len(v), -1))
        packed = np.zeros((8, len(block), 3, double.n_cell), complex)
        packed[c] = iterate.fields.reshape(len(block), 3, double.n_cell)
        true = exact_rows[c] - double(packed)[c].reshape(len(block), -1)
        scale = np.linalg.norm(block)
        assert np.linalg.norm(true - iterate.residual) < 1e-6 * scale
        assert np.linalg.norm(true) < 1e-2 * scale


def test_a_start_is_judged_by_the_strength_of_its_directions(system):
    # One strong and one weak direction: the one wrong altogether counts with its share of B.
    _, b = system
    basis = np.linalg.qr(b[:2].T)[0].T
    block = np.array([[3.0], [0.1]]) * basis
    iterate = ClassIterate(block)
    wanted = iterate.propose(1e-12)
    strong = np.argmax(np.linalg.norm(block @ wanted.conj().T, axis=0))
    images = wanted.copy()
    assert iterate.shortfall(wanted, images)[0] == pytest.approx(0.0, abs=1e-12)
    images[1 - strong] = 0.0
    missed, whole = iterate.shortfall(wanted, images)
    assert whole == pytest.approx(np.linalg.norm(block), rel=1e-12)
    assert missed == pytest.approx(0.1, rel=1e-10)
    images[1 - strong], images[strong] = wanted[1 - strong], 0.0
    assert iterate.shortfall(wanted, images)[0] == pytest.approx(3.0, rel=1e-10)
