"""Closed surfaces of triangles for tests."""

from __future__ import annotations

import numpy as np
import trimesh

from scatterloom.particle.polyhedron import Polyhedron
from scatterloom.particle.shapes import SolidShape
from scatterloom.solids.mesh import Interface, Mesh, Solid
from scatterloom.solids.placing import centre


def mesh_of(body: Polyhedron) -> Mesh:
    """A convex polyhedron, each face a piece of its own."""
    fans = [(face[0], face[i], face[i + 1]) for face in body.faces for i in range(1, len(face) - 1)]
    piece = np.repeat(np.arange(len(body.faces)), [len(face) - 2 for face in body.faces])
    return Mesh(body.corners, np.array(fans, dtype=np.int32), piece.astype(np.int32))


def globe(finesse: int, half_axes=(1.0, 1.0, 1.0)) -> Mesh:
    """An ellipsoid by 20 * 4**finesse triangles with their corners on it."""
    ball = trimesh.creation.icosphere(subdivisions=finesse)
    triangles = ball.faces.astype(np.int32)
    corners = np.asarray(ball.vertices) * np.array(half_axes)
    return Mesh(corners, triangles, np.zeros(len(triangles), dtype=np.int32))


def block(low, high) -> Mesh:
    """A box between two corners, its faces pieces of their own."""
    box = trimesh.creation.box(bounds=[low, high])
    piece = np.unique(np.round(box.face_normals), axis=0, return_inverse=True)[1].ravel()
    return Mesh(np.asarray(box.vertices), box.faces.astype(np.int32), piece.astype(np.int32))


def joined(*meshes: Mesh) -> Mesh:
    """Several surfaces as one."""
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


def reversed_mesh(mesh: Mesh) -> Mesh:
    """The same surface seen from the other side."""
    return Mesh(mesh.corners, np.ascontiguousarray(mesh.triangles[:, ::-1]), mesh.piece)


def shape_of(solid: Solid | Mesh, core: float | None = None) -> SolidShape:
    """A solid as a particle."""
    body = solid if isinstance(solid, Solid) else Solid((Interface(solid),))
    return SolidShape("test", body.normalized(centre(body)), core_radius_fraction=core)


def is_closed(mesh: Mesh) -> bool:
    """Whether every edge is passed once in either sense, and no corner is left over."""
    edges = np.concatenate([mesh.triangles[:, [i, (i + 1) % 3]] for i in range(3)]).astype(np.int64)
    count = len(mesh.corners)
    there, back = edges @ [count, 1], edges @ [1, count]
    once = len(np.unique(there)) == len(there)
    return once and np.array_equal(np.sort(there), np.sort(back))
