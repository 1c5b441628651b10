"""Exact overlap of any closed surface of triangles with the cells of a cubic lattice.

Every triangle is split along the planes of the lattice into pieces that lie in one cell each.
By the divergence theorem with the field (0, 0, z), a piece with the area vector (.., .., A) adds to
its own cell A times its mean height above the cell's floor, and A to each cell below; so do
the first moments, with one more factor. All integrals over pieces are those of polynomials of
second degree over triangles, exact to rounding; what lies below is one sum along z at the end. The
surface may have dents, hollows and several parts: nothing asks what is inside.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numba import njit
from numpy.typing import NDArray

from scatterloom.particle.overlap import FULL
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]

_ON_PLANE = 1e-11
"""Corners this near [cells] to a plane of the lattice are moved onto it, so that a face there
cuts no cell; its area belongs to the cell on its inner side."""


@dataclass(frozen=True, eq=False)
class SurfaceCells:
    """A closed surface on a lattice, in cells.

    Attributes
    ----------
    fill : float64 box
        Volume fraction of each cell inside the surface; 1 in cells that it does not enter.
    moment : float64 box + (3,)
        Integral over the inside part of the cell of the position from the cell's centre.
    piece : int32 (n_entry,)
        Smooth piece of surface, ascending.
    cell : int64 (n_entry,)
        Cell that holds a part of the piece, as an index into the flattened box.
    vector : float64 (n_entry, 3)
        Area vector of that part, in units of a cell's face.
    """

    fill: Floats
    moment: Floats
    piece: NDArray[np.int32]
    cell: NDArray[np.int64]
    vector: Floats

    def only(self, kept: NDArray[np.bool_]) -> SurfaceCells:
        """The same cells with some of the entries of pieces."""
        return replace(self, piece=self.piece[kept], cell=self.cell[kept], vector=self.vector[kept])


@njit(cache=True)
def _split(polygon, count, axis, at, low, high):  # type: ignore[no-untyped-def]
    """Split a convex polygon at a plane; return the numbers of corners on either side."""
    below, above = 0, 0
    for i in range(count):
        j = i + 1 if i + 1 < count else 0
        here, there = polygon[i, axis], polygon[j, axis]
        if here <= at:
            low[below] = polygon[i]
            below += 1
        if here >= at:
            high[above] = polygon[i]
            above += 1
        if (here < at < there) or (there < at < here):
            share = (at - here) / (there - here)
            for c in range(3):
                low[below, c] = polygon[i, c] + share * (polygon[j, c] - polygon[i, c])
            low[below, axis] = at
            high[above] = low[below]
            below += 1
            above += 1
    return below, above


@njit(cache=True)
def _slabs(polygon, count, axis, outward, cells):  # type: ignore[no-untyped-def]
    """First and last slab of the lattice along an axis that a polygon enters."""
    low, high = polygon[0, axis], polygon[0, axis]
    for i in range(1, count):
        low, high = min(low, polygon[i, axis]), max(high, polygon[i, axis])
    first, last = int(np.floor(low)), int(np.ceil(high)) - 1
    if low == high and low == first:
        # In a plane of the lattice: the slab on the inner side.
        first = first - 1 if outward > 0.0 else first
        last = first
    return min(max(first, 0), cells - 1), min(max(last, 0), cells - 1)


@njit(cache=True)
def _add(polygon, count, i, j, k, own, below, vector):  # type: ignore[no-untyped-def]
    """Add a piece that lies in cell (i, j, k): volume and moments, and its area vector."""
    x, y, z = i + 0.5, j + 0.5, float(k)
    vector[:] = 0.0
    for t in range(1, count - 1):
        u0, u1, u2 = polygon[0, 0] - x, polygon[t, 0] - x, polygon[t + 1, 0] - x
        v0, v1, v2 = polygon[0, 1] - y, polygon[t, 1] - y, polygon[t + 1, 1] - y
        w0, w1, w2 = polygon[0, 2] - z, polygon[t, 2] - z, polygon[t + 1, 2] - z
        vector[0] += 0.5 * ((v1 - v0) * (w2 - w0) - (w1 - w0) * (v2 - v0))
        vector[1] += 0.5 * ((w1 - w0) * (u2 - u0) - (u1 - u0) * (w2 - w0))
        area = 0.5 * ((u1 - u0) * (v2 - v0) - (v1 - v0) * (u2 - u0))
        vector[2] += area
        u, v, w = u0 + u1 + u2, v0 + v1 + v2, w0 + w1 + w2
        own[i, j, k, 0] += area * w / 3.0
        own[i, j, k, 1] += area * (u0 * w0 + u1 * w1 + u2 * w2 + u * w) / 12.0
        own[i, j, k, 2] += area * (v0 * w0 + v1 * w1 + v2 * w2 + v * w) / 12.0
        square = (w0 * w0 + w1 * w1 + w2 * w2 + w * w) / 12.0
        own[i, j, k, 3] += 0.5 * area * (square - w / 3.0)
        below[i, j, k, 0] += area
        below[i, j, k, 1] += area * u / 3.0
        below[i, j, k, 2] += area * v / 3.0


@njit(cache=True)
def _walk(corners, triangles, piece, order, box, sense):  # type: ignore[no-untyped-def]
    nx, ny, nz = box
    own = np.zeros((nx, ny, nz, 4))
    below = np.zeros((nx, ny, nz, 3))
    # The entry of every cell for the piece at work, and how many entries there are.
    entry = np.full((nx, ny, nz), -1, dtype=np.int64)
    begun, used = 0, 0
    pieces = np.empty(4096, dtype=np.int32)
    cells = np.empty(4096, dtype=np.int64)
    vectors = np.empty((4096, 3))
    # A triangle cut by six planes has at most nine corners.
    room = np.empty((6, 12, 3))
    vector = np.empty(3)
    current = -1
    for t in order:
        if piece[t] != current:
            current, begun = piece[t], used
        for c in range(3):
            room[0, c] = corners[triangles[t, c]]
        a, b = sense * (room[0, 1] - room[0, 0]), room[0, 2] - room[0, 0]
        normal_x = a[1] * b[2] - a[2] * b[1]
        normal_y = a[2] * b[0] - a[0] * b[2]
        normal_z = a[0] * b[1] - a[1] * b[0]
        count_x = 3
        first_x, last_x = _slabs(room[0], count_x, 0, normal_x, nx)
        for i in range(first_x, last_x + 1):
            # Each split leaves the part in this slab in one buffer, the rest in the next.
            if i < last_x:
                count_y, count_x = _split(room[0], count_x, 0, i + 1.0, room[1], room[2])
                room[0, :count_x] = room[2, :count_x]
            else:
                room[1, :count_x] = room[0, :count_x]
                count_y = count_x
            if count_y < 3:
                continue
            first_y, last_y = _slabs(room[1], count_y, 1, normal_y, ny)
            for j in range(first_y, last_y + 1):
                if j < last_y:
                    count_z, count_y = _split(room[1], count_y, 1, j + 1.0, room[3], room[2])
                    room[1, :count_y] = room[2, :count_y]
                else:
                    room[3, :count_y] = room[1, :count_y]
                    count_z = count_y
                if count_z < 3:
                    continue
                first_z, last_z = _slabs(room[3], count_z, 2, normal_z, nz)
                for k in range(first_z, last_z + 1):
                    if k < last_z:
                        count, count_z = _split(room[3], count_z, 2, k + 1.0, room[4], room[2])
                        room[3, :count_z] = room[2, :count_z]
                    else:
                        room[4, :count_z] = room[3, :count_z]
                        count = count_z
                    if count < 3:
                        continue
                    _add(room[4], count, i, j, k, own, below, vector)
                    e = entry[i, j, k]
                    if e < begun:
                        if used == pieces.size:
                            pieces = np.concatenate((pieces, pieces))
                            cells = np.concatenate((cells, cells))
                            vectors = np.concatenate((vectors, vectors))
                        e = used
                        entry[i, j, k] = e
                        pieces[e], cells[e] = current, (i * ny + j) * nz + k
                        vectors[e] = 0.0
                        used += 1
                    vectors[e] += sense * vector
    return own, below, pieces[:used], cells[:used], vectors[:used]


def surface_cells(
    mesh: Mesh, origin: Floats, box: tuple[int, int, int], hollow: bool = False
) -> SurfaceCells:
    """Cells of the inside of a closed surface, and the surface in every cell.

    Parameters
    ----------
    mesh : Mesh
        Closed, turned and scaled so that the edge of a cell is 1; it lies within the box.
    origin : float64 (3,)
        Place of the mesh's origin in the box, in cells from its lowest corner.
    box : tuple of 3 int
    hollow : bool
        Whether the surface is seen from what is around it: the area vectors point inwards
        then. Fill and moment are those of the inside in any case.

    Returns
    -------
    SurfaceCells
        Exact to about 1e-12; a face that lies on faces of cells belongs to those which its
        area vector points out of.
    """
    corners = mesh.corners + np.asarray(origin, dtype=np.float64)
    nearest = np.round(corners)
    corners = np.where(np.abs(corners - nearest) < _ON_PLANE, nearest, corners)
    corners = np.clip(corners, 0.0, np.array(box, dtype=np.float64))
    order = np.argsort(mesh.piece, kind="stable")
    own, below, piece, cell, vector = _walk(
        corners, mesh.triangles, mesh.piece, order, box, -1.0 if hollow else 1.0
    )
    # Each cell gets what the pieces above it drop.
    dropped = np.zeros_like(below)
    dropped[:, :, :-1] = np.cumsum(below[:, :, :0:-1], axis=2)[:, :, ::-1]
    fill = np.clip(own[..., 0] + dropped[..., 0], 0.0, 1.0)
    fill[fill >= FULL] = 1.0
    moment = own[..., 1:]
    moment[..., :2] += dropped[..., 1:]
    moment[(fill == 0.0) | (fill == 1.0)] = 0.0
    return SurfaceCells(fill, moment, piece, cell, vector)
