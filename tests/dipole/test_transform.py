"""Transforms of padded columns in vector lanes, against numpy's."""

import numpy as np
import pytest

from lattice_kit import random_lattice, random_waves
from scatterloom.dipole.polarizability import cell_tensors
from scatterloom.dipole.product import LatticeMatrix
from scatterloom.dipole.transform import efficient_length, transform_columns, transform_plan

RNG = np.random.default_rng(7)


def test_efficient_lengths():
    lengths = [n for n in range(1, 200) if efficient_length(n) == n]
    assert lengths[:16] == [1, 2, 3, 4, 5, 6, 8, 9, 10, 12, 15, 16, 18, 20, 24, 25]
    for n in range(1, 200):
        assert efficient_length(n) == min(length for length in [*lengths, 200] if length >= n)


@pytest.mark.parametrize("half", [1, 2, 3, 4, 5, 6, 8, 9, 15, 16, 20, 25, 32, 60, 64, 81, 128])
def test_factors_are_those_of_the_length(half):
    radices, factors = transform_plan(half, np.float64)
    assert np.prod(radices) == half
    np.testing.assert_allclose(
        factors[:half] @ [1, 1j], np.exp(-1j * np.pi * np.arange(half) / half), atol=1e-15
    )


@pytest.mark.parametrize("missing", [0, 1])
@pytest.mark.parametrize("half", [1, 2, 3, 4, 5, 6, 8, 9, 16, 20, 25, 32, 60, 64, 128])
@pytest.mark.parametrize(("dtype", "tolerance"), [(np.float64, 1e-15), (np.float32, 5e-7)])
def test_padded_columns_there_and_back(half, missing, dtype, tolerance):
    n = max(1, half - missing)
    lanes, columns = (0,) * 16, 3
    values = RNG.normal(size=(n, columns, 2, 16)).astype(dtype)
    grid = np.full((2 * half, columns, 2, 16), np.nan, dtype)
    grid[:n] = values
    # the middle column holds zeros and is not used
    grid[:n, 1] = values[:, 1] = 0.0
    used = np.array([True, False, True])
    radices, table = transform_plan(half, dtype)
    work = np.empty(4 * half * 32, dtype)
    box, halves = (n, 1, columns), (half, 1, 1)
    strides = (grid.strides[0], columns * grid.strides[1], grid.strides[1])

    def run(inverse):
        transform_columns(
            grid.reshape(-1),
            work,
            used,
            box,
            halves,
            strides,
            radices,
            table,
            inverse,
            0,
            columns,
            lanes,
        )

    run(False)
    expected = np.fft.fft(values[:, :, 0] + 1j * values[:, :, 1].astype(complex), 2 * half, axis=0)
    found = grid[:, :, 0] + 1j * grid[:, :, 1].astype(complex)
    scale = np.linalg.norm(expected) / np.sqrt(expected.size)
    # rounding grows with the number of passes
    assert np.abs(found - expected).max() < 20 * tolerance * scale
    np.testing.assert_array_equal(found[:, 1], 0.0)
    run(True)
    back = grid[:n] / (2 * half)
    for column in (0, 2):
        assert np.abs(back[:, column] - values[:, column]).max() < 20 * tolerance


@pytest.mark.parametrize("count", [1, 2, 3, 5, 7, 12])
def test_waves_do_not_depend_on_their_company(count):
    # groups of two and of five waves, full and not
    cells = random_lattice((4, 3, 5), (True, False, False))
    tensors = cell_tensors(cells.fill, cells.normal, 1.5 + 0.1j, 0.4)
    matrix = LatticeMatrix(cells, tensors, 0.4, np.complex128)
    waves = random_waves(matrix, count)
    together = matrix(waves)
    for w in range(count):
        alone = matrix(np.ascontiguousarray(waves[:, w : w + 1]))
        np.testing.assert_allclose(together[:, w : w + 1], alone, atol=1e-14)


def test_any_number_of_threads_gives_the_same_bits():
    cells = random_lattice((6, 4, 5), (True, True, False))
    tensors = cell_tensors(cells.fill, cells.normal, 1.5 + 0.1j, 0.4)
    matrices = [LatticeMatrix(cells, tensors, 0.4, threads=n) for n in (1, 2, 5)]
    waves = random_waves(matrices[0], 8)
    one, *others = (matrix(waves) for matrix in matrices)
    for other in others:
        np.testing.assert_array_equal(one, other)
