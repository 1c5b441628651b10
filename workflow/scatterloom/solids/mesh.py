"""Closed surfaces of triangles: what every body without a formula of its own is made of."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

Symmetry = Literal["sphere", "axial", "mirrors", "none"]

MEDIUM = -1
"""Stands for the host medium where materials are numbered."""


# Compared and hashed by identity: it holds arrays.
@dataclass(frozen=True, eq=False)
class Mesh:
    """A closed surface of triangles; it may have several parts, hollows and dents.

    Attributes
    ----------
    corners : float64 (n_corner, 3)
    triangles : int32 (n_triangle, 3)
        Corners of every triangle, counterclockwise seen from outside.
    piece : int32 (n_triangle,)
        Smooth piece of surface each triangle belongs to, numbered from 0: pieces meet at edges.
    """

    corners: Floats
    triangles: NDArray[np.int32]
    piece: NDArray[np.int32]

    @property
    def area_vectors(self) -> Floats:
        """Outward normal times area of every triangle, float64 (n_triangle, 3)."""
        a, b, c = (self.corners[self.triangles[:, i]] for i in range(3))
        return 0.5 * np.cross(b - a, c - a)

    @property
    def area(self) -> float:
        """Area of the surface."""
        return float(np.linalg.norm(self.area_vectors, axis=1).sum())

    @property
    def volume(self) -> float:
        """Volume inside, from the divergence theorem."""
        first = self.corners[self.triangles[:, 0]]
        return float(np.sum(self.area_vectors * first)) / 3.0

    @property
    def centroid(self) -> Floats:
        """Centre of mass of the inside, float64 (3,)."""
        a, b, c = (self.corners[self.triangles[:, i]] for i in range(3))
        # Tetrahedra between the origin and the triangles, with signed volumes.
        sixfold = np.einsum("ij,ij->i", a, np.cross(b, c))
        return (sixfold @ (a + b + c)) / (4.0 * sixfold.sum())

    def turned(self, rotation: Floats) -> Mesh:
        """The same surface with every corner multiplied by a rotation, float64 (3, 3)."""
        return Mesh(self.corners @ rotation.T, self.triangles, self.piece)

    def moved(self, shift: Floats, scale: float = 1.0) -> Mesh:
        """The same surface shifted, then scaled about the origin."""
        return Mesh((self.corners + shift) * scale, self.triangles, self.piece)


@dataclass(frozen=True, eq=False)
class Interface:
    """A closed surface with one material inside and another one outside.

    Attributes
    ----------
    mesh : Mesh
    inside, outside : int
        Numbers of the materials on either side, -1 for the medium. Surfaces of one solid do
        not cross; one inside another replaces the material within.
    beyond : tuple of int or None
        For a grain in touch with others, what lies beyond each piece of its surface, -1 for
        the medium; each of the others has a surface of its own, and the grain lies in the medium
        otherwise (`outside` is -1). None if `outside` lies everywhere.
    """

    mesh: Mesh
    inside: int = 0
    outside: int = MEDIUM
    beyond: tuple[int, ...] | None = None


@dataclass(frozen=True, eq=False)
class Solid:
    """A body: closed surfaces that do not cross, and what is between them.

    Attributes
    ----------
    interfaces : tuple of Interface
    symmetry : str or None
        Symmetry about the origin of the body that the triangles stand for, where it is known:
        ``sphere``, ``axial`` (rotation about z, and mirrors), ``mirrors`` (x, y, z) or ``none``.
        It is believed, and the origin stays the centre; None to find centre and mirror planes
        from the corners.
    """

    interfaces: tuple[Interface, ...]
    symmetry: Symmetry | None = None

    @property
    def volume(self) -> float:
        """Volume of everything that is not medium."""
        return math.fsum(
            face.mesh.volume * ((face.inside != MEDIUM) - (face.outside != MEDIUM))
            for face in self.interfaces
        )

    @property
    def materials(self) -> int:
        """How many materials there are."""
        return 1 + max(max(face.inside, face.outside) for face in self.interfaces)

    def normalized(self, centre: Floats) -> Solid:
        """The same body about this centre, with the volume 4 pi / 3."""
        scale = math.cbrt(4.0 * math.pi / 3.0 / self.volume)
        return Solid(
            tuple(replace(face, mesh=face.mesh.moved(-centre, scale)) for face in self.interfaces),
            self.symmetry,
        )
