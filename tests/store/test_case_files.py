"""Case files give back exactly what was written, and every damage is noticed and named."""

from __future__ import annotations

import hashlib
import struct
import zlib

import numpy as np
import pytest
from rayleigh_cases import record, records

from scatterloom.errors import IntegrityError
from scatterloom.store.casefile import (
    FORMAT_VERSION,
    SIGNATURE,
    read_records,
    write_records,
)

HEAD = len(SIGNATURE) + 4 + 8 + 32


@pytest.fixture
def path(tmp_path):
    written = tmp_path / "some.cases"
    write_records(written, records())
    return written


def assert_same(left, right):
    a, b = left.to_arrays(), right.to_arrays()
    assert list(a) == list(b)
    for name in a:
        one, two = np.asarray(a[name]), np.asarray(b[name])
        assert one.dtype == two.dtype, name
        assert one.shape == two.shape, name
        assert one.tobytes() == two.tobytes(), name


def test_round_trip_is_exact_to_the_bit(path):
    read = read_records(path)
    assert len(read) == 6
    for one, two in zip(records(), read, strict=True):
        assert_same(one, two)


def test_awkward_numbers_survive(tmp_path):
    numbers = np.array([np.nan, np.inf, -np.inf, -0.0, 5e-324, 0.1 + 0.2])
    odd = record("ball", 0.01)
    odd.expansion = np.resize(numbers, odd.expansion.shape)
    odd.residual = float("nan")
    write_records(tmp_path / "odd.cases", [odd])
    (back,) = read_records(tmp_path / "odd.cases")
    assert back.expansion.tobytes() == odd.expansion.tobytes()
    assert np.isnan(back.residual)


def test_no_records_at_all(tmp_path):
    write_records(tmp_path / "none.cases", [])
    assert read_records(tmp_path / "none.cases") == []


def test_equal_records_give_equal_files(tmp_path, path):
    write_records(tmp_path / "again.cases", records())
    assert (tmp_path / "again.cases").read_bytes() == path.read_bytes()


def test_a_flipped_bit_is_found_wherever_it_is(path):
    content = path.read_bytes()
    # Every byte of the head, and the payload at a stride that is no power of two.
    positions = [*range(HEAD), *range(HEAD, len(content), 7), len(content) - 1]
    for position in positions:
        damaged = bytearray(content)
        damaged[position] ^= 1 << (position % 8)
        path.write_bytes(damaged)
        with pytest.raises(IntegrityError, match=r"some\.cases: "):
            read_records(path)


def test_a_cut_is_found_and_named_wherever_it_is(path):
    content = path.read_bytes()
    for length in [*range(1, HEAD + 3), len(content) // 2, len(content) - 1]:
        path.write_bytes(content[:length])
        with pytest.raises(IntegrityError, match=r"some\.cases: cut short"):
            read_records(path)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda content: content + b"more", "altered"),
        (lambda content: b"", "not a scatterloom case file"),
        (lambda content: b"PK\x03\x04" + content, "not a scatterloom case file"),
        (lambda content: content.replace(b"\n", b"\r\n"), "not a scatterloom case file"),
        (lambda content: b"\x00" * len(content), "not a scatterloom case file"),
    ],
    ids=["appended", "empty", "zip", "text mode", "zeros"],
)
def test_other_damage_is_named(path, change, message):
    path.write_bytes(change(path.read_bytes()))
    with pytest.raises(IntegrityError, match=rf"some\.cases: {message}"):
        read_records(path)


def sealed(version: int, payload: bytes) -> bytes:
    """A file whose digest is right, whatever it holds."""
    fixed = struct.pack("<IQ", version, len(payload))
    return SIGNATURE + fixed + hashlib.sha256(fixed + payload).digest() + payload


def test_a_foreign_version_is_named(path):
    path.write_bytes(sealed(FORMAT_VERSION + 1, path.read_bytes()[HEAD:]))
    with pytest.raises(IntegrityError, match=f"format version {FORMAT_VERSION + 1}"):
        read_records(path)


@pytest.mark.parametrize(
    "payload",
    [
        b"no zlib stream",
        zlib.compress(b"\x05\x00\x00\x00[[1]]"),
        zlib.compress(b'\x14\x00\x00\x00[[["a","|O",[1]]]]  '),
        zlib.compress(b"\x02\x00\x00\x00[[]] and more"),
    ],
    ids=["no stream", "no arrays", "objects", "leftover"],
)
def test_whole_content_of_another_program_is_refused(path, payload):
    path.write_bytes(sealed(FORMAT_VERSION, payload))
    with pytest.raises(IntegrityError, match="no set of case records"):
        read_records(path)


def test_a_missing_file_is_named(tmp_path):
    with pytest.raises(IntegrityError, match=r"absent\.cases: the case file is missing"):
        read_records(tmp_path / "absent.cases")


def test_only_plain_arrays_are_written(tmp_path):
    class Odd:
        def to_arrays(self):
            return {"a": np.array([object()])}

    with pytest.raises(TypeError, match="'a'"):
        write_records(tmp_path / "odd.cases", [Odd()])
    assert list(tmp_path.iterdir()) == []
