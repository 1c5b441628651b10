"""Corners freed of the rounding of the file they come from.

Files often hold single precision. Faces along an axis and mirror images are then off by some
1e-7 of the extent, which is nothing to a particle but hides its mirror planes and lets faces cut
layers of cells they should end at.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree

from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

_ROUNDING = 1e-6
"""Over the largest extent: coordinates nearer than this become one."""


def evened(mesh: Mesh) -> Mesh:
    """The surface with no corner moved by more than some 1e-6 of the largest extent.

    Along each axis, coordinates that differ by rounding become their mean; and if the corners are
    mirror images of each other about the middle, but for rounding, they become so.
    """
    near = _ROUNDING * float(np.ptp(mesh.corners, axis=0).max())
    corners = np.stack([_gathered(values, near) for values in mesh.corners.T], axis=1)
    for axis in range(3):
        corners = _mirrored(corners, axis, 4.0 * near)
    return Mesh(corners, mesh.triangles, mesh.piece)


def _gathered(values: Floats, near: float) -> Floats:
    order = np.argsort(values, kind="stable")
    ascending = values[order]
    group = np.empty(len(values), dtype=np.int64)
    first, number = -np.inf, -1
    for place, value in enumerate(ascending.tolist()):
        if value - first > near:
            first, number = value, number + 1
        group[place] = number
    low = ascending[np.flatnonzero(np.diff(group, prepend=-1))]
    # About the lowest value, so that equal values stay what they are to the last bit.
    means = low + np.bincount(group, ascending - low[group]) / np.bincount(group)
    out = np.empty_like(values)
    out[order] = means[group]
    return out


def _mirrored(corners: Floats, axis: int, near: float) -> Floats:
    middle = 0.5 * (corners[:, axis].min() + corners[:, axis].max())
    image = corners.copy()
    image[:, axis] = 2.0 * middle - image[:, axis]
    distance, partner = KDTree(corners).query(image)
    if distance.max() > near or not np.array_equal(partner[partner], np.arange(len(corners))):
        return corners
    return 0.5 * (corners + image[partner])
