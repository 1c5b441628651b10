"""Files of transition matrices: what averages over other orientations start from."""

from __future__ import annotations

import json
import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from scatterloom.errors import IntegrityError
from scatterloom.scattering.variants import Variants, variants_from
from scatterloom.store.atomic import atomic_write
from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.waves.basis import complex_from_real

FORMAT_VERSION = 1

_NOT_TRANSITIONS = (
    OSError,
    ValueError,
    KeyError,
    EOFError,
    TypeError,
    RuntimeError,
    zipfile.BadZipFile,
    zlib.error,
)
"""What a damaged archive may raise."""


@dataclass(frozen=True, eq=False)
class StoredTransitions:
    """Transition matrices of one case.

    Attributes
    ----------
    digest : str
        Of the case.
    symmetry : str
        Of the particle: ``sphere``, ``axial``, ``mirrors``, ``none``.
    cells : tuple of int
        Cells across on each level.
    variants : Variants
    """

    digest: str
    symmetry: str
    cells: tuple[int, ...]
    variants: Variants


def write_transitions(path: Path, stored: StoredTransitions) -> None:
    """Write the matrices of a case to `path`, which appears whole or not at all.

    A zip archive of npy arrays in single precision, whose rounding (1e-7) is far below the
    error of the amplitudes. Elements that symmetry makes zero are left out.
    """
    count = len(stored.cells) + 1
    sources = stored.variants.sources[:count]
    matrices = np.stack([source.matrix for source in sources])
    present = np.flatnonzero(np.any(matrices != 0.0, axis=0))
    header = {
        "version": FORMAT_VERSION,
        "digest": stored.digest,
        "symmetry": stored.symmetry,
        "cells": list(stored.cells),
        "n_max": sources[0].n_max,
    }
    path.parent.mkdir(parents=True, exist_ok=True)
    with atomic_write(path) as stream:
        np.savez(
            stream,
            header=np.array(json.dumps(header)),
            present=present.astype(np.uint32),
            values=matrices.reshape(count, -1)[:, present].astype(np.complex64),
        )


def read_transitions(path: Path) -> StoredTransitions:
    """Read the matrices of a case.

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
                    f"{path}: transition matrices of format version {header['version']}, "
                    f"this program reads version {FORMAT_VERSION}"
                )
            n_max, cells = int(header["n_max"]), tuple(int(n) for n in header["cells"])
            values, present = archive["values"], archive["present"]
    except FileNotFoundError:
        raise IntegrityError(f"{path}: the file is missing") from None
    except _NOT_TRANSITIONS as error:
        raise IntegrityError(f"{path}: not a whole file of matrices ({error})") from None
    if not 1 <= n_max <= 200 or len(values) != len(cells) + 1:
        raise IntegrityError(f"{path}: not a whole file of matrices (its header is wrong)")
    labels = complex_from_real(n_max)[1]
    size = len(labels.kind)
    flat = np.zeros((len(values), size * size), dtype=np.complex128)
    flat[:, present] = values
    *corrected, plain = (TransitionMatrix(m.reshape(size, size), labels) for m in flat)
    made = variants_from(corrected, [plain], cells)
    return StoredTransitions(str(header["digest"]), str(header["symmetry"]), cells, made)
