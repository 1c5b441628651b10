"""Several closed surfaces as one."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from scatterloom.solids.mesh import Mesh


def joined(meshes: Sequence[Mesh]) -> Mesh:
    """One mesh of several surfaces that do not cross; pieces are numbered on."""
    corners, pieces = 0, 0
    triangles, numbers = [], []
    for mesh in meshes:
        triangles.append(mesh.triangles + corners)
        numbers.append(mesh.piece + pieces)
        corners += len(mesh.corners)
        pieces += int(mesh.piece.max()) + 1
    return Mesh(
        np.concatenate([mesh.corners for mesh in meshes]),
        np.concatenate(triangles).astype(np.int32),
        np.concatenate(numbers).astype(np.int32),
    )
