"""Search directions on disk: the same numbers, less memory, nothing left behind."""

from dataclasses import replace

import numpy as np
import pytest

from lattice_kit import OBLATE, of_shape
from scatterloom.campaign.memory import PROGRAM_BYTES, case_bytes
from scatterloom.solve import spill
from scatterloom.solve.spill import Spill, add_rows, overlap
from scatterloom.transition.level import solve_level


@pytest.fixture
def rows():
    rng = np.random.default_rng(4)
    return (rng.normal(size=(5, 700)) + 1j * rng.normal(size=(5, 700))).astype(np.complex64)


@pytest.mark.parametrize("part_bytes", [1, 5 * 8 * 64, 1 << 20])
def test_products_by_parts(tmp_path, rows, monkeypatch, part_bytes):
    monkeypatch.setattr(spill, "_PART_BYTES", part_bytes)
    kept = Spill(tmp_path / "new")(rows)
    assert isinstance(kept, np.memmap) and not kept.flags.writeable
    np.testing.assert_array_equal(kept, rows)
    left = rows[:3] * 2.0
    # Sums of 700 products in single precision, in another order.
    np.testing.assert_allclose(overlap(left, kept), left @ rows.conj().T, atol=2e-3)
    target = left.copy()
    factors = rows[:3, :5].copy()
    add_rows(target, factors, kept)
    np.testing.assert_allclose(target, left + factors @ rows, atol=1e-4)


def test_files_have_no_name(tmp_path, rows):
    store = Spill(tmp_path)
    kept = [store(rows) for _ in range(3)]
    assert list(tmp_path.iterdir()) == []
    assert store.nbytes == 3 * rows.nbytes
    np.testing.assert_array_equal(kept[1], rows)


def test_a_solve_on_disk_is_the_same_solve(tmp_path):
    lattice = replace(of_shape(OBLATE, 10), mirrors=(False, False, False), symmetry="none")
    index, x, n_max = 1.6 + 0.01j, 1.5, 5
    within = solve_level(lattice, index, x, n_max, 1e-5)
    beyond = solve_level(lattice, index, x, n_max, 1e-5, spill=tmp_path)
    assert within.solution.history == beyond.solution.history
    # One part a block: the same operations in the same order.
    np.testing.assert_array_equal(within.transition.matrix, beyond.transition.matrix)
    assert list(tmp_path.iterdir()) == []


def test_less_memory_is_foreseen():
    whole, spilled = (
        case_bytes((1, 1, 1), (1, 1, 1, 1), 0, 5.0, (24, 32, 40), 0.02, spilled=on)
        for on in (False, True)
    )
    assert (spilled - PROGRAM_BYTES) < 0.75 * (whole - PROGRAM_BYTES)
