"""Files of solved fields: their precision, and damage to them."""

import numpy as np
import pytest

from scatterloom.errors import IntegrityError
from scatterloom.solve.start import StoredFields
from scatterloom.store.fields import FieldFile, read_fields, write_fields


def test_fields_are_kept_to_eight_bits(tmp_path):
    rng = np.random.default_rng(2)
    rows = rng.normal(size=(5, 40)) * 10.0 ** rng.integers(-20, 20, (5, 1))
    rows = (rows + 1j * rng.normal(size=(5, 40))).astype(np.complex64)
    rows[0, 0], rows[0, 1] = np.nan, 0.0
    path = tmp_path / "some.npz"
    write_fields(path, [FieldFile("ab", 1.0, 2.0, [StoredFields(1.0, [rows])])])
    (found,) = read_fields(path)
    kept = found.levels[0].rows[0]
    assert kept.dtype == np.complex64 and kept.shape == rows.shape
    assert np.isnan(kept[0, 0]) and kept[0, 1] == 0.0
    for a, b in ((kept.real, rows.real), (kept.imag, rows.imag)):
        np.testing.assert_allclose(a.ravel()[2:], b.ravel()[2:], rtol=2.0**-8)
    assert path.stat().st_size < 4 * rows.size + 1500
    again = tmp_path / "again.npz"
    write_fields(again, [found])
    np.testing.assert_array_equal(read_fields(again)[0].levels[0].rows[0], kept)


def test_no_changed_bit_and_no_cut_passes_for_fields(tmp_path):
    # Every byte of a small file, one bit at a time: refused with its name, or (padding,
    # dates) the same content.
    rng = np.random.default_rng(1)
    # numbers of eight bits are kept exactly
    rows = [(rng.integers(-127, 128, (2, 3)) / 16).astype(np.complex64) for _ in range(2)]
    path = tmp_path / "some.npz"
    write_fields(path, [FieldFile("ab", 1.0, 2.0, [StoredFields(1.0, rows)])])
    content = path.read_bytes()
    refused = 0
    for position in range(len(content)):
        damaged = bytearray(content)
        damaged[position] ^= 1 << position % 8
        path.write_bytes(damaged)
        try:
            (found,) = read_fields(path)
        except IntegrityError as error:
            assert str(path) in str(error)
            refused += 1
            continue
        assert (found.digest, found.size_parameter, found.products) == ("ab", 1.0, 2.0)
        for a, b in zip(found.levels[0].rows, rows, strict=True):
            np.testing.assert_array_equal(a, b)
    assert refused > 0.5 * len(content)
    for length in range(0, len(content), 7):
        path.write_bytes(content[:length])
        with pytest.raises(IntegrityError, match=r"some\.npz"):
            read_fields(path)
