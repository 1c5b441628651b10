"""The packed, transformed product against the matrix written out in full."""

import numpy as np
import pytest

from lattice_kit import (
    OBLATE,
    TRIAXIAL,
    full_matrix,
    of_shape,
    packed_matrix,
    random_lattice,
    random_waves,
    unfold,
)

INDEX, KD = 1.6 + 0.05j, 0.4

MIRRORS = [
    (True, True, True),
    (True, True, False),
    (True, False, True),
    (False, True, True),
    (True, False, False),
    (False, True, False),
    (False, False, True),
    (False, False, False),
]


def box_for(mirrors):
    """Unequal sides, odd wherever no mirror plane asks for an even one."""
    return tuple(
        even if m else odd for m, even, odd in zip(mirrors, (4, 6, 2), (5, 3, 7), strict=True)
    )


@pytest.fixture(
    scope="module",
    params=MIRRORS,
    ids=lambda m: "".join("xyz"[a] for a in range(3) if m[a]) or "none",
)
def particle(request):
    cells = random_lattice(box_for(request.param), request.param)
    return cells, full_matrix(cells, INDEX, KD)


def relative(found, expected):
    return np.linalg.norm(found - expected) / np.linalg.norm(expected)


@pytest.mark.parametrize(
    # rounding of transforms: some 1e-16 and 6e-8 times the logarithm of their length
    ("dtype", "tolerance"),
    [(np.complex128, 1e-14), (np.complex64, 1e-6)],
)
def test_product_is_the_dense_one(particle, dtype, tolerance):
    cells, expected_matrix = particle
    matrix = packed_matrix(cells, INDEX, KD, dtype)
    # More waves than one pass takes.
    waves = random_waves(matrix, 11)
    image = matrix(waves)
    assert image.dtype == dtype
    fields, images = (unfold(cells, w.astype(complex)) for w in (waves, image))
    flat = fields.reshape(*fields.shape[:2], -1)
    expected = flat @ expected_matrix.T
    # class by class: no class leaks into another one
    for c in range(matrix.n_class):
        found = images[c].reshape(images.shape[1], -1)
        assert relative(found, expected[c]) < tolerance


def test_one_class_alone_stays_in_its_class(particle):
    cells, _ = particle
    matrix = packed_matrix(cells, INDEX, KD)
    waves = random_waves(matrix, 2)
    together = matrix(waves)
    for c in range(matrix.n_class):
        alone = np.zeros_like(waves)
        alone[c] = waves[c]
        image = matrix(alone)
        others = np.delete(image, c, axis=0)
        scale = np.abs(image[c]).max()
        assert np.all(np.abs(others) < 1e-14 * scale)
        np.testing.assert_allclose(image[c], together[c], atol=1e-13 * scale)


def test_declared_planes_do_not_change_a_symmetric_particle():
    # A fully symmetric lattice is valid with any of its planes declared.
    whole = of_shape(TRIAXIAL, 6, (False, False, False))
    expected = full_matrix(whole, INDEX, KD)
    for mirrors in MIRRORS:
        cells = of_shape(TRIAXIAL, 6, mirrors)
        matrix = packed_matrix(cells, INDEX, KD)
        assert matrix.n_cell * matrix.n_class == len(cells.cell)
        waves = random_waves(matrix, 2)
        fields, images = (
            unfold(cells, w).sum(axis=0).reshape(2, -1) for w in (waves, matrix(waves))
        )
        assert relative(images, fields @ expected.T) < 1e-14


def test_linear_and_complex_symmetric(particle):
    cells, _ = particle
    matrix = packed_matrix(cells, INDEX, KD)
    x, y = random_waves(matrix, 3, seed=4), random_waves(matrix, 3, seed=5)
    ax, ay = matrix(x), matrix(y)
    combined = matrix((2.0 - 1.0j) * x + 0.5j * y)
    assert relative(combined, (2.0 - 1.0j) * ax + 0.5j * ay) < 1e-14
    # x^T A y = y^T A x without conjugation: reciprocity
    left, right = np.sum(x * ay, axis=(2, 3)), np.sum(y * ax, axis=(2, 3))
    np.testing.assert_allclose(left, right, rtol=1e-12)


def test_input_is_left_alone_and_products_are_counted():
    matrix = packed_matrix(of_shape(OBLATE, 6), INDEX, KD, np.complex64)
    waves = random_waves(matrix, 9)
    kept = waves.copy()
    out = np.empty_like(waves)
    assert matrix.products == 0
    first = matrix(waves)
    assert matrix.products == 9
    assert matrix(waves[:, :2].copy(), None).shape[1] == 2
    assert matrix.products == 11
    assert matrix(waves, out) is out
    np.testing.assert_array_equal(out, first)
    np.testing.assert_array_equal(waves, kept)
    assert matrix(waves[:, :0]).shape == (8, 0, 3, matrix.n_cell)
    assert matrix.products == 20


def test_wrong_arrays_are_refused():
    matrix = packed_matrix(of_shape(OBLATE, 4), INDEX, KD, np.complex64)
    good = random_waves(matrix, 2)
    for bad in (good.astype(np.complex128), good[:4], good[..., :-1], good[:, :, :2]):
        with pytest.raises(ValueError, match="waves are"):
            matrix(bad)
    assert matrix.products == 0


def test_threads_and_memory():
    cells = of_shape(OBLATE, 8)
    one, two = (packed_matrix(cells, INDEX, KD, np.complex64, threads=n) for n in (1, 2))
    waves = random_waves(one, 5)
    np.testing.assert_allclose(one(waves), two(waves), rtol=1e-5, atol=1e-5)
    # Kernel octant alone: (h+1)^3 6 values of 8 bytes.
    kernel = 6 * 8 * np.prod([h + 1 for h in one.half])
    assert one.nbytes > kernel
    assert packed_matrix(cells, INDEX, KD).nbytes > 1.5 * one.nbytes
