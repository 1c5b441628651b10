"""Closed surfaces read from STL, OBJ and PLY files."""

from __future__ import annotations

import io
from pathlib import PurePath

import numpy as np
import trimesh
from numpy.typing import NDArray

FORMATS = (".stl", ".obj", ".ply")
LARGEST_FILE = 256 * 2**20
MOST_TRIANGLES = 1_000_000

Arrays = dict[str, NDArray]


def read_mesh(content: bytes, name: str) -> Arrays:
    """Read corners and triangles; corners at the very same place become one.

    Only the geometry counts. Material libraries, textures and whatever else the file names are
    not looked for, and nothing in the file is executed.

    Parameters
    ----------
    content : bytes
        The whole file.
    name : str
        Its name, whose ending tells the format.

    Returns
    -------
    dict
        `corners`, float64 (n, 3), and `triangles`, int32 (m, 3).

    Raises
    ------
    ValueError
        If the file cannot be read as what its name says, or holds no triangles or too many.
    """
    ending = PurePath(name).suffix.lower()
    if ending not in FORMATS:
        raise ValueError(f"the ending {ending!r} is none of {', '.join(FORMATS)}")
    try:
        found = trimesh.load_mesh(
            io.BytesIO(content), file_type=ending[1:], process=False, skip_materials=True
        )
        corners = np.array(found.vertices, dtype=np.float64)
        triangles = np.array(found.faces, dtype=np.int64)
    except Exception as error:  # whatever the reader trips over
        reason = f"{type(error).__name__}: {error}"[:200]
        raise ValueError(f"the file cannot be read as {ending[1:].upper()} ({reason})") from None
    if triangles.ndim != 2 or not len(triangles):
        raise ValueError("the file holds no triangles")
    if len(triangles) > MOST_TRIANGLES:
        raise ValueError(
            f"{len(triangles)} triangles, more than {MOST_TRIANGLES}: decimate the mesh; a lattice "
            "cannot show such detail"
        )
    if triangles.min() < 0 or triangles.max() >= len(corners):
        raise ValueError("a triangle names a corner that is not there")
    if not np.all(np.isfinite(corners[triangles])):
        raise ValueError("a corner is not finite")
    return merged(corners, triangles)


def merged(corners: NDArray[np.float64], triangles: NDArray[np.int64]) -> Arrays:
    """Corners at the same place as one; those in use only, and no triangle on two corners."""
    # Adding 0 turns the negative zero, another bit pattern for the same place.
    places, where = np.unique(corners + 0.0, axis=0, return_inverse=True)
    triangles = where.ravel()[triangles]
    a, b, c = triangles.T
    triangles = triangles[(a != b) & (b != c) & (c != a)]
    used, number = np.unique(triangles, return_inverse=True)
    return {
        "corners": places[used],
        "triangles": number.reshape(-1, 3).astype(np.int32),
    }
