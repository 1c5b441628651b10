"""Case files: the records of one or many solved cases in one self-checking file.

Layout (all integers little-endian)::

    8 bytes   signature  89 53 4C 43 41 53 45 0A ("\\x89SLCASE\\n")
    4 bytes   format version
    8 bytes   length of the payload
    32 bytes  SHA-256 of the version, the length and the payload
    payload   zlib stream of: 4 bytes header length, JSON header, array bytes

The header lists, per record, every array's name, dtype and shape; the bytes
follow in the same order, C-contiguous. Nothing is pickled. A text-mode transfer
breaks the signature, a cut breaks the length, any changed bit breaks the digest.
"""

from __future__ import annotations

import errno
import hashlib
import json
import struct
import zlib
from collections.abc import Iterable
from pathlib import Path

import numpy as np

from scatterloom.errors import IntegrityError
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.atomic import atomic_write

SIGNATURE = b"\x89SLCASE\n"
FORMAT_VERSION = 1

_FIXED = struct.Struct("<IQ32s")
_HEADER_LENGTH = struct.Struct("<I")
_NOT_RECORDS = (
    zlib.error,
    struct.error,
    ValueError,
    KeyError,
    IndexError,
    TypeError,
    AttributeError,
    ArithmeticError,
    MemoryError,
    RecursionError,
)
_PLAIN_KINDS = "biufcSU"


def write_records(path: Path | str, records: Iterable[CaseRecord]) -> None:
    """Write `records` to `path`, which appears whole or not at all.

    Parameters
    ----------
    path : path
        Replaced if it exists.
    records : iterable of CaseRecord
        Kept in order; may be empty.

    Raises
    ------
    TypeError
        If a record holds an array that is not of plain numbers or text.
    OSError
        From the file system.
    """
    payload = zlib.compress(_encode([record.to_arrays() for record in records]), level=1)
    digest = _digest(FORMAT_VERSION, len(payload), payload)
    with atomic_write(path) as stream:
        stream.write(SIGNATURE)
        stream.write(_FIXED.pack(FORMAT_VERSION, len(payload), digest))
        stream.write(payload)


def read_records(path: Path | str) -> list[CaseRecord]:
    """Read every record of a case file.

    Raises
    ------
    IntegrityError
        Naming the file and what is wrong: missing, not a case file, another
        version's, cut short, too long, or altered.
    """
    path = Path(path)
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise IntegrityError(f"{path}: the case file is missing") from None
    except OSError as error:
        if error.errno != errno.EIO:
            raise
        raise IntegrityError(f"{path}: the medium fails ({error.strerror})") from None
    payload = _checked_payload(path, content)
    try:
        return [CaseRecord.from_arrays(arrays) for arrays in _decode(zlib.decompress(payload))]
    except _NOT_RECORDS as error:
        # The digest is right, so the file is as written: the writer was another program.
        raise IntegrityError(
            f"{path}: the content is whole but is no set of case records ({error})"
        ) from error


def check_file(path: Path, *, digest: bool = True) -> None:
    """Check that a case file is whole and as it was written, without decoding it.

    Parameters
    ----------
    path : Path
    digest : bool
        Whether to read all of it, or only its first bytes and its length.

    Raises
    ------
    IntegrityError
        Naming the file and what is wrong.
    """
    if digest:
        _checked_payload(path, path.read_bytes())
        return
    head = len(SIGNATURE) + _FIXED.size
    with open(path, "rb") as stream:
        content = stream.read(head)
    expected = 0
    if len(content) == head and content.startswith(SIGNATURE):
        expected = head + _FIXED.unpack_from(content, len(SIGNATURE))[1]
    if path.stat().st_size != expected:
        # Rare: the whole check finds the words.
        _checked_payload(path, path.read_bytes())


def _checked_payload(path: Path, content: bytes) -> bytes:
    head = len(SIGNATURE)
    if content[:head] != SIGNATURE[: len(content)] or not content:
        raise IntegrityError(f"{path}: not a scatterloom case file (its first bytes are wrong)")
    if len(content) < head + _FIXED.size:
        raise IntegrityError(f"{path}: cut short, only {len(content)} bytes are left")
    version, length, digest = _FIXED.unpack_from(content, head)
    payload = content[head + _FIXED.size :]
    if len(payload) < length and version == FORMAT_VERSION:
        raise IntegrityError(
            f"{path}: cut short, {len(payload)} of {length} bytes of its content are left"
        )
    if _digest(version, length, payload) != digest:
        raise IntegrityError(
            f"{path}: altered since it was written (its SHA-256 digest does not match)"
        )
    if version != FORMAT_VERSION:
        raise IntegrityError(
            f"{path}: written in format version {version}, "
            f"but this program reads version {FORMAT_VERSION}"
        )
    return payload


def _digest(version: int, length: int, payload: bytes) -> bytes:
    whole = hashlib.sha256(struct.pack("<IQ", version, length))
    whole.update(payload)
    return whole.digest()


def _encode(records: list[dict[str, np.ndarray]]) -> bytes:
    header: list[list[tuple[str, str, tuple[int, ...]]]] = []
    blocks: list[bytes] = []
    for arrays in records:
        entries = []
        for name, value in arrays.items():
            array = np.asarray(value)
            if array.dtype.kind not in _PLAIN_KINDS:
                raise TypeError(f"array {name!r} of type {array.dtype} can't go into a case file")
            array = array.astype(array.dtype.newbyteorder("<"), copy=False)
            entries.append((name, array.dtype.str, array.shape))
            blocks.append(array.tobytes(order="C"))
        header.append(entries)
    text = json.dumps(header, separators=(",", ":")).encode()
    return b"".join([_HEADER_LENGTH.pack(len(text)), text, *blocks])


def _decode(content: bytes) -> list[dict[str, np.ndarray]]:
    (length,) = _HEADER_LENGTH.unpack_from(content)
    position = _HEADER_LENGTH.size + length
    records = []
    for entries in json.loads(content[_HEADER_LENGTH.size : position]):
        arrays = {}
        for name, code, shape in entries:
            dtype = np.dtype(code)
            if dtype.kind not in _PLAIN_KINDS:
                raise ValueError(f"array {name!r} has type {code}")
            count = int(np.prod(shape, dtype=np.int64))
            flat = np.frombuffer(content, dtype, count, position) if count else np.empty(0, dtype)
            # A copy: records own their memory instead of pinning the whole file's.
            arrays[name] = flat.reshape(shape).copy()
            position += count * dtype.itemsize
        records.append(arrays)
    if position != len(content):
        raise ValueError(f"{len(content) - position} bytes are left over")
    return records
