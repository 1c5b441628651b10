"""Solids from files: meshes and label volumes."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from scatterloom.solids import kept
from scatterloom.solids.adjacency import with_smooth_pieces
from scatterloom.solids.evening import evened
from scatterloom.solids.labels import label_solid, read_labels, trimmed
from scatterloom.solids.mesh import Interface, Mesh, Solid
from scatterloom.solids.mesh_file import Arrays, read_mesh
from scatterloom.solids.soundness import check_closed_body


def mesh_arrays(content: bytes, name: str) -> Arrays:
    """Corners and triangles of a file that a campaign names, or of one kept beside results.

    Raises
    ------
    ValueError
        If there are none in it.
    """
    if not name.endswith(kept.ENDING):
        return read_mesh(content, name)
    arrays = kept.unpacked(content)
    corners, triangles = arrays.get("corners"), arrays.get("triangles")
    if (
        corners is None
        or triangles is None
        or corners.dtype != np.float64
        or triangles.dtype != np.int32
        or corners.ndim != 2
        or triangles.ndim != 2
        or (corners.shape[1], triangles.shape[1]) != (3, 3)
        or not len(triangles)
        or triangles.min() < 0
        or triangles.max() >= len(corners)
        or not np.isfinite(corners).all()
    ):
        raise ValueError("the file does not hold corners, float64 (n, 3), and triangles of them, "
                         "int32 (m, 3)")  # fmt: skip
    return {"corners": corners, "triangles": triangles}


def check_mesh(arrays: Arrays) -> int:
    """Check that corners and triangles enclose a body; return the number of its separate parts.

    Raises
    ------
    ValueError
        With what is wrong and what would be right.
    """
    return check_closed_body(_mesh(arrays))


def mesh_solid(spec: Mapping[str, Any]) -> Solid:
    """Solid of a shape ``{"kind": "mesh", "content": digest, "edge_angle_deg": angle}``."""
    mesh = evened(_mesh(kept.recall(spec["content"])))
    return Solid((Interface(with_smooth_pieces(mesh, float(spec["edge_angle_deg"]))),))


def label_arrays(place: Path, variable: str | None) -> Arrays:
    """Labels of a volume that a campaign names, or of one kept beside results.

    Raises
    ------
    ValueError
        If there are none.
    """
    if place.suffix != kept.ENDING:
        return {"labels": read_labels(place, variable)}
    labels = kept.unpacked(place.read_bytes()).get("labels")
    if labels is None:
        raise ValueError("the file does not hold labels")
    return {"labels": trimmed(labels)}


def voxel_solid(spec: Mapping[str, Any]) -> Solid:
    """Solid of a shape ``{"kind": "voxels", "content": digest}``."""
    return label_solid(trimmed(kept.recall(spec["content"])["labels"]))


def _mesh(arrays: Mapping[str, Any]) -> Mesh:
    triangles = arrays["triangles"]
    return Mesh(arrays["corners"], triangles, np.zeros(len(triangles), dtype=np.int32))
