"""Content of files that shapes are made of, by digest, so that shapes need no file of the user's.

What is read with a campaign is remembered here and written beside its results; a job looks
there. A digest is that of the arrays, not of the file they came in.
"""

from __future__ import annotations

import hashlib
import io
import zipfile
from collections.abc import Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from scatterloom.errors import IntegrityError

ENDING = ".npz"

Arrays = Mapping[str, NDArray]

_remembered: dict[str, Arrays] = {}
_folders: list[Path] = []


def remember(arrays: Arrays) -> str:
    """Keep arrays for the life of this process; return their digest."""
    digest = digest_of(arrays)
    _remembered[digest] = dict(arrays)
    return digest


def look_in(folder: Path) -> None:
    """Have `recall` look for files in a folder."""
    if folder not in _folders:
        _folders.append(folder)


def recall(digest: str) -> Arrays:
    """Arrays by digest, remembered or from one of the folders.

    Raises
    ------
    IntegrityError
        If they are nowhere, or the file that should hold them is not as it was written.
    """
    if digest in _remembered:
        return _remembered[digest]
    for folder in _folders:
        path = folder / file_name(digest)
        if not path.is_file():
            continue
        try:
            arrays = unpacked(path.read_bytes())
        except (OSError, ValueError) as error:
            raise IntegrityError(f"{path}: not as it was written ({error})") from None
        if digest_of(arrays) != digest:
            raise IntegrityError(f"{path}: its content is not that of its name")
        _remembered[digest] = arrays
        return arrays
    raise IntegrityError(
        f"the particle with content {digest[:16]} is nowhere: run the campaign again with its file"
    )


def file_name(digest: str) -> str:
    """Name of the file that keeps arrays."""
    return f"{digest}{ENDING}"


def digest_of(arrays: Arrays) -> str:
    """SHA-256 over names, types, shapes and values, 64 hexadecimal digits."""
    whole = hashlib.sha256()
    for name in sorted(arrays):
        array = _plain(arrays[name])
        whole.update(f"{name} {array.dtype.str} {array.shape}\n".encode())
        whole.update(array.tobytes())
    return whole.hexdigest()


def packed(arrays: Arrays) -> bytes:
    """Arrays as the content of an .npz file; the same arrays give the same bytes."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for name in sorted(arrays):
            stream = io.BytesIO()
            np.lib.format.write_array(stream, _plain(arrays[name]), allow_pickle=False)
            entry = zipfile.ZipInfo(f"{name}.npy", (1980, 1, 1, 0, 0, 0))
            entry.compress_type = zipfile.ZIP_DEFLATED
            archive.writestr(entry, stream.getvalue())
    return out.getvalue()


def unpacked(content: bytes) -> dict[str, NDArray]:
    """Arrays of an .npz file.

    Raises
    ------
    ValueError
        If it is none, or holds Python objects.
    """
    try:
        with np.load(io.BytesIO(content), allow_pickle=False) as file:
            return {name: file[name] for name in file.files}
    except (OSError, ValueError, KeyError, EOFError, zipfile.BadZipFile) as error:
        raise ValueError(f"no file of arrays: {error}") from None


def _plain(array: NDArray) -> NDArray:
    """The array in C order and little-endian, whatever machine it comes from."""
    return np.ascontiguousarray(array, dtype=array.dtype.newbyteorder("<"))
