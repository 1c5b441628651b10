"""Solids drawn as shaded surfaces, seen from afar."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.colors import to_rgb
from numpy.typing import NDArray

from scatterloom.solids.mesh import MEDIUM, Interface, Solid

Floats = NDArray[np.float64]

_LIGHT = np.array([-0.35, 0.45, 0.82])
"""Towards the light: from the upper left, in front."""


def view(azimuth_deg: float = 35.0, elevation_deg: float = 22.0) -> Floats:
    """Rotation into the picture: x to the right, y up, z towards the eye."""
    a, e = math.radians(azimuth_deg), math.radians(elevation_deg)
    eye = np.array([math.cos(e) * math.cos(a), math.cos(e) * math.sin(a), math.sin(e)])
    right = np.array([-math.sin(a), math.cos(a), 0.0])
    return np.stack([right, np.cross(eye, right), eye])


def draw_solid(axes: Axes, solid: Solid, colours: list[str], open_half: bool) -> None:
    """Draw a solid into axes of equal scale.

    Parameters
    ----------
    axes : Axes
    solid : Solid
    colours : list of str
        One for each material.
    open_half : bool
        Whether the half of outer surfaces that faces the eye is left out, so that what is
        inside can be seen.
    """
    turn = view()
    shapes, depths, paint = [], [], []
    for face in solid.interfaces:
        outer = face.outside == MEDIUM
        look = _triangles(face, turn, hollow=open_half and outer)
        shapes.append(look[0])
        depths.append(look[1])
        colour = np.array(to_rgb("#ffffff" if face.inside == MEDIUM else colours[face.inside]))
        paint.append(look[2][:, None] * colour)
    order = np.argsort(np.concatenate(depths), kind="stable")
    flat, rgb = np.concatenate(shapes)[order], np.concatenate(paint)[order]
    rgb = np.clip(rgb, 0.0, 1.0)
    axes.add_collection(
        PolyCollection(list(flat), facecolors=rgb, edgecolors=rgb, linewidths=0.3, rasterized=True)
    )
    reach = max(float(np.abs(points).max()) for points in shapes)
    axes.set_xlim(-1.05 * reach, 1.05 * reach)
    axes.set_ylim(-1.05 * reach, 1.05 * reach)
    axes.set_aspect("equal")
    axes.axis("off")


def _triangles(face: Interface, turn: Floats, hollow: bool) -> tuple[Floats, Floats, Floats]:
    """Corners in the picture (n, 3, 2), depths and brightness of those that are seen."""
    mesh = face.mesh.turned(turn)
    vectors = mesh.area_vectors
    normal = vectors / np.maximum(np.linalg.norm(vectors, axis=1, keepdims=True), 1e-300)
    # Of an opened body the inner side of its back is seen.
    seen = normal[:, 2] < 0.0 if hollow else normal[:, 2] > 0.0
    # Slivers have no direction of their own.
    area = np.linalg.norm(vectors, axis=1)
    seen &= area > 1e-3 * np.median(area)
    corners = mesh.corners[mesh.triangles[seen]]
    facing = -normal[seen] if hollow else normal[seen]
    light = np.clip(facing @ (_LIGHT / np.linalg.norm(_LIGHT)), 0.0, 1.0)
    bright = 0.35 + 0.7 * light if not hollow else 0.75 + 0.25 * light
    return corners[:, :, :2], corners[:, :, 2].mean(axis=1), bright
