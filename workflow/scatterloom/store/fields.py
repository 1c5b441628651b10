"""Files of solved fields, by which span jobs start from the anchors of other jobs."""

from __future__ import annotations

import json
import zipfile
import zlib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from scatterloom.errors import IntegrityError
from scatterloom.solve.start import StoredFields
from scatterloom.store.atomic import atomic_write

FORMAT_VERSION = 1

# What a damaged archive may raise: a changed bit can also ask for encryption (RuntimeError)
# or for an unknown compression (NotImplementedError, a RuntimeError).
_NOT_FIELDS = (
    OSError,
    ValueError,
    KeyError,
    EOFError,
    TypeError,
    RuntimeError,
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


def write_fields(path: Path, anchors: Sequence[FieldFile]) -> None:
    """Write the fields of some anchors to `path`, which appears whole or not at all.

    An uncompressed zip archive of npy arrays: its directory is written last and each member
    carries a checksum, so a cut or changed file is noticed.
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
                arrays[f"{i}/{j}/{c}"] = rows
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
                            [archive[f"{i}/{j}/{c}"] for c in range(count)],
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
