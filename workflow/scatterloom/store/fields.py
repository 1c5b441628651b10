"""Files of solved fields, by which span jobs start from the anchors of other jobs."""

from __future__ import annotations

import json
import zipfile
import zlib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from scatterloom.errors import IntegrityError
from scatterloom.solve.start import StoredFields
from scatterloom.store.atomic import atomic_write

FORMAT_VERSION = 2

# What a damaged archive may raise: a changed bit can also ask for encryption (RuntimeError)
# or for an unknown compression (NotImplementedError, a RuntimeError).
_NOT_FIELDS = (
    OSError,
    ValueError,
    KeyError,
    EOFError,
    TypeError,
    RuntimeError,
    ArithmeticError,
    AttributeError,
    zipfile.BadZipFile,
    zlib.error,
)


@dataclass(frozen=True)
class FieldFile:
    """Fields of one anchor.

    Attributes
    ----------
    digest : str
        Of its case.
    size_parameter : float
    products : float
        Products per wave that its solution took, mean over the levels.
    levels : list of StoredFields
        Coarse to fine.
    """

    digest: str
    size_parameter: float
    products: float
    levels: list[StoredFields]


def _shortened(rows: NDArray[np.complex64]) -> NDArray[np.uint16]:
    """Real and imaginary parts rounded to eight significant bits: (n_wave, 2 n_row).

    The upper halves of single-precision numbers. An error of 0.1 % on average is a
    fraction of what interpolation in size leaves, and rounding twice changes nothing.
    """
    bits = np.ascontiguousarray(rows, dtype=np.complex64).view(np.uint32)
    # to the nearest, ties to even
    rounded = ((bits + (0x7FFF + ((bits >> 16) & 1))) >> 16).astype(np.uint16)
    return np.where(np.isnan(bits.view(np.float32)), np.uint16(0x7FC0), rounded)


def _restored(short: NDArray[np.uint16]) -> NDArray[np.complex64]:
    """Inverse of `_shortened`, to its precision."""
    if short.dtype != np.uint16 or short.ndim != 2 or short.shape[1] % 2:
        raise ValueError(f"array of {short.dtype} {short.shape} is not a block of fields")
    return (short.astype(np.uint32) << 16).view(np.complex64)


def write_fields(path: Path, anchors: Sequence[FieldFile]) -> None:
    """Write the fields of some anchors to `path`, which appears whole or not at all.

    An uncompressed zip archive of npy arrays, numbers shortened to two bytes. Its directory is
    written last and each member carries a checksum, so a cut or changed file is noticed.
    """
    header = {
        "version": FORMAT_VERSION,
        "anchors": [
            {
                "digest": a.digest,
                "size_parameter": a.size_parameter,
                "products": a.products,
                "levels": [len(level.rows) for level in a.levels],
            }
            for a in anchors
        ],
    }
    arrays: dict[str, np.ndarray] = {"header": np.array(json.dumps(header))}
    for i, anchor in enumerate(anchors):
        for j, level in enumerate(anchor.levels):
            for c, rows in enumerate(level.rows):
                arrays[f"{i}/{j}/{c}"] = _shortened(rows)
    path.parent.mkdir(parents=True, exist_ok=True)
    with atomic_write(path) as stream:
        np.savez(stream, **arrays)  # type: ignore[arg-type]


def read_fields(path: Path) -> list[FieldFile]:
    """Read a file of fields.

    Raises
    ------
    IntegrityError
        If the file is missing, cut, changed or of another version; names file and fault.
    """
    try:
        with np.load(path, allow_pickle=False) as archive:
            header = json.loads(str(archive["header"]))
            if header["version"] != FORMAT_VERSION:
                raise IntegrityError(
                    f"{path}: fields of format version {header['version']}, "
                    f"this program reads version {FORMAT_VERSION}"
                )
            return [
                FieldFile(
                    entry["digest"],
                    float(entry["size_parameter"]),
                    float(entry["products"]),
                    [
                        StoredFields(
                            float(entry["size_parameter"]),
                            [_restored(archive[f"{i}/{j}/{c}"]) for c in range(count)],
                        )
                        for j, count in enumerate(entry["levels"])
                    ],
                )
                for i, entry in enumerate(header["anchors"])
            ]
    except FileNotFoundError:
        raise IntegrityError(f"{path}: the file is missing") from None
    except _NOT_FIELDS as error:
        raise IntegrityError(f"{path}: not a whole file of fields ({error})") from None
