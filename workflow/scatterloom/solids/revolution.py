"""Bodies of revolution about z, from their outline."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

AROUND = 400
"""Corners around the axis: sides of half a cell at 64 cells across."""


def revolved(outlines: Sequence[Floats], around: int = AROUND) -> Mesh:
    """Surface that parts of an outline sweep, each a piece of its own.

    Every ring is the regular polygon with the area of its circle, so straight outlines give
    the exact volume between any two heights.

    Parameters
    ----------
    outlines : sequence of float64 (n, 2)
        Distance from the axis and height, from the upper end on the axis to the lower one;
        each part begins where the one before ended.
    around : int
        Corners around the axis, a multiple of 4.
    """
    angle = 2.0 * math.pi * np.arange(around) / around
    stretch = math.sqrt(2.0 * math.pi / around / math.sin(2.0 * math.pi / around))
    # Mirror images to the last bit.
    quarter = np.cos(angle[: around // 4 + 1])
    quarter[-1] = 0.0
    x = np.concatenate([quarter, -quarter[-2::-1], -quarter[1:], quarter[-2:0:-1]]) * stretch
    y = np.roll(x, around // 4)
    corners: list[Floats] = []
    triangles: list[NDArray[np.int64]] = []
    piece: list[NDArray[np.int64]] = []
    ring, used = None, 0

    def make(radius: float, height: float) -> NDArray[np.int64]:
        nonlocal used
        if radius == 0.0:
            corners.append(np.array([[0.0, 0.0, height]]))
            numbers = np.full(around, used)
            used += 1
            return numbers
        corners.append(np.stack([radius * x, radius * y, np.full(around, height)], axis=1))
        numbers = used + np.arange(around)
        used += around
        return numbers

    for part, outline in enumerate(outlines):
        for step, (radius, height) in enumerate(outline):
            if step == 0 and ring is not None:
                continue
            below = make(radius, height)
            if ring is not None:
                after, under = np.roll(ring, -1), np.roll(below, -1)
                new = []
                if below[0] != below[1]:
                    new.append(np.stack([ring, below, under], axis=1))
                if ring[0] != ring[1]:
                    new.append(np.stack([ring, under, after], axis=1))
                triangles.extend(new)
                piece.extend(np.full(len(rows), part) for rows in new)
            ring = below
    return Mesh(
        np.concatenate(corners),
        np.concatenate(triangles).astype(np.int32),
        np.concatenate(piece).astype(np.int32),
    )


def frustum(lower: float, upper: float, height: float) -> Mesh:
    """A frustum, or a cone, or a cylinder, about z = 0.

    Parameters
    ----------
    lower, upper : float
        Radii of its ends; one may be zero.
    height : float
    """
    top, bottom = 0.5 * height, -0.5 * height
    outlines = [np.array([(upper, top), (lower, bottom)])]
    if upper:
        outlines.insert(0, np.array([(0.0, top), (upper, top)]))
    if lower:
        outlines.append(np.array([(lower, bottom), (0.0, bottom)]))
    return revolved(outlines)


def capsule(radius: float, length: float, steps: int = 64) -> Mesh:
    """A cylinder with half a sphere on either end, about z = 0.

    Rings of the caps lie where every ring of surface between two of them holds the volume of
    the sphere there.

    Parameters
    ----------
    radius : float
    length : float
        That of the whole body, at least twice the radius.
    steps : int
        Rings on each cap.
    """
    polar = 0.5 * math.pi * np.arange(steps + 1) / steps
    # Half the bulge above a chord of the meridian, as mean over the chord: two thirds of it.
    bulge = 1.0 + (0.5 * math.pi / steps) ** 2 / 12.0
    across, along = radius * bulge * np.sin(polar), radius * bulge * np.cos(polar)
    across[0], along[-1] = 0.0, 0.0
    across[-1] = radius
    shift = 0.5 * length - radius
    upper = np.stack([across, along + shift], axis=1)
    lower = np.stack([across, -along - shift], axis=1)[::-1]
    outline = np.concatenate([upper, lower if shift > 0.0 else lower[1:]])
    return revolved([outline])
