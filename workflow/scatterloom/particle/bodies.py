"""Cells of a particle, whatever its shape and its place on the lattice."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.ball import ball_overlap
from scatterloom.particle.clipping import polyhedron_overlap
from scatterloom.particle.overlap import FULL, octant_overlap
from scatterloom.particle.polyhedron import Polyhedron
from scatterloom.particle.shapes import Ellipsoid, Faceted, Shape, SolidShape
from scatterloom.particle.surface_cells import SurfaceCells, surface_cells
from scatterloom.solids.mesh import MEDIUM, Interface

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Placement:
    """Where a particle lies on its lattice.

    Attributes
    ----------
    spacing : float
        Edge of a cell in units of the equal-volume-sphere radius.
    rotation : float64 (3, 3)
        Turns a vector of the particle frame into the lattice frame.
    origin : float64 (3,)
        Centre of the particle, in cells from the lowest corner of the box.
    box : tuple of 3 int
        Cells along each axis.
    """

    spacing: float
    rotation: Floats
    origin: Floats
    box: tuple[int, int, int]

    @property
    def centred(self) -> bool:
        """Whether the axes agree and the particle's centre is a corner in the box's middle."""
        turned = not np.array_equal(self.rotation, np.eye(3))
        even = all(n % 2 == 0 for n in self.box)
        return even and not turned and bool(np.all(2.0 * self.origin == self.box))


@dataclass(frozen=True, eq=False)
class Surface:
    """All surfaces with the same two materials on either side, cell by cell.

    Attributes
    ----------
    inside, outside : int
        Materials on either side, -1 for the medium; the inside is never medium.
    piece : int32 (n,)
        Smooth piece of surface, ascending.
    cell : int64 (n,)
        Cell that holds a part of the piece.
    vector : float64 (n, 3)
        Area vector (outward mean normal times area) of that part, in units of a cell's face. A
        flat face that lies on faces of cells belongs to the full cells on its inner side.
    """

    inside: int
    outside: int
    piece: NDArray[np.int32]
    cell: NDArray[np.int64]
    vector: Floats

    @property
    def pieces(self) -> int:
        """Number of smooth pieces."""
        return int(self.piece[-1]) + 1 if self.piece.size else 0

    def within(self, number: NDArray[np.int64]) -> Surface:
        """The same surface with other numbers of cells; those numbered -1 are left out."""
        cell = number[self.cell]
        kept = cell >= 0
        return replace(self, piece=self.piece[kept], cell=cell[kept], vector=self.vector[kept])

    def added(self, cells: int) -> Floats:
        """Sum over the pieces in every cell, float64 (cells, 3)."""
        out = np.zeros((cells, 3))
        np.add.at(out, self.cell, self.vector)
        return out


@dataclass(frozen=True, eq=False)
class Cut:
    """A particle on its lattice.

    Attributes
    ----------
    fill : float64 box
        Volume fraction inside the particle.
    fraction : float64 (n_material,) + box
        Volume fraction of each material in every cell.
    surfaces : tuple of Surface
        What lies between each pair of materials; cells are indices into the flattened box.
    regions : tuple of Surface
        Closed surfaces, each with one material inside, which together make up the particle. They
        are the same but for grains in touch, whose surface is closed by what lies between
        them. Empty where first moments are not made use of.
    moment : float64 (n_region,) + box + (3,)
        Integral of the position from the cell's centre [cells] over the part of each cell
        that a region encloses.
    """

    fill: Floats
    fraction: Floats
    surfaces: tuple[Surface, ...]
    regions: tuple[Surface, ...]
    moment: Floats


@dataclass(frozen=True, eq=False)
class _Body:
    """One body: fill fractions, area vectors of its pieces, first moments if made use of."""

    fill: Floats
    vectors: list[Floats]
    moment: Floats | None = None


def cut(shape: Shape, placement: Placement) -> Cut:
    """Cells of a particle."""
    if isinstance(shape, SolidShape):
        return _solid(shape, placement)
    # Nested bodies: each material is what one body holds beyond the next.
    bodies = [_convex(shape, scale, placement) for scale in shape.scales]
    held = [bodies[0].fill, *(np.minimum(body.fill, bodies[0].fill) for body in bodies[1:])]
    held.append(np.zeros_like(held[0]))
    moments = [body.moment for body in bodies if body.moment is not None]
    surfaces = tuple(_sparse(m, m - 1, body.vectors) for m, body in enumerate(bodies))
    return Cut(
        fill=bodies[0].fill,
        fraction=np.stack([outside - within for outside, within in pairwise(held)]),
        surfaces=surfaces,
        regions=surfaces if moments else (),
        moment=np.stack(moments) if moments else np.zeros((0, *placement.box, 3)),
    )


def _sparse(inside: int, outside: int, vectors: list[Floats]) -> Surface:
    """Area vectors of each piece in every cell, from those in the whole box."""
    flat = [vector.reshape(-1, 3) for vector in vectors]
    cells = [np.flatnonzero(np.any(vector != 0.0, axis=1)) for vector in flat]
    return Surface(
        inside=inside,
        outside=outside,
        piece=np.repeat(np.arange(len(flat), dtype=np.int32), [cell.size for cell in cells]),
        cell=np.concatenate(cells),
        vector=np.concatenate([v[cell] for v, cell in zip(flat, cells, strict=True)]) + 0.0,
    )


def _convex(shape: Shape, scale: float, placement: Placement) -> _Body:
    """Cells of a convex body, made smaller by `scale` about its centre."""
    if isinstance(shape, Ellipsoid):
        return _ellipsoid(shape.half_axes * scale, placement)
    if isinstance(shape, Faceted):
        corners = shape.body.corners @ placement.rotation.T
        body = Polyhedron(corners * (scale / placement.spacing), shape.body.faces)
        return _polyhedron(body, placement)
    raise TypeError(f"no cells are known for {type(shape).__name__}")


def _ellipsoid(half_axes: Floats, placement: Placement) -> _Body:
    if placement.centred:
        nx, ny, nz = (n // 2 for n in placement.box)
        fill, area = octant_overlap(placement.spacing / half_axes, (nx, ny, nz))
        # One octant reflected: the mirror symmetry is exact to the last bit.
        for axis in range(3):
            image = np.flip(area, axis).copy()
            image[..., axis] *= -1.0
            area = np.concatenate((image, area), axis)
            fill = np.concatenate((np.flip(fill, axis), fill), axis)
        return _Body(fill, [area])
    edges = placement.spacing * placement.rotation / half_axes
    fill, area = ball_overlap(edges, placement.origin, placement.box)
    return _Body(fill, [area])


def _polyhedron(body: Polyhedron, placement: Placement) -> _Body:
    normals, _ = body.planes
    fill, facet, moment = polyhedron_overlap(body, placement.origin, placement.box)
    fill[fill >= FULL] = 1.0
    return _Body(fill, [a[..., None] * n for a, n in zip(facet, normals, strict=True)], moment)


def _solid(shape: SolidShape, placement: Placement) -> Cut:
    """Cells of a solid: what its surfaces enclose, added up with their signs."""
    fraction = np.zeros((shape.solid.materials, *placement.box))
    between: dict[tuple[int, int], list[SurfaceCells]] = {}
    regions: dict[tuple[int, int], list[SurfaceCells]] = {}
    moments: dict[tuple[int, int], Floats] = {}
    for face in shape.solid.interfaces:
        mesh = face.mesh.turned(placement.rotation).moved(np.zeros(3), 1.0 / placement.spacing)
        hollow = face.inside == MEDIUM
        cells = surface_cells(mesh, placement.origin, placement.box, hollow)
        # Seen from the material, a hollow takes away what it encloses.
        sign = -1.0 if hollow else 1.0
        pair = (face.outside, MEDIUM) if hollow else (face.inside, face.outside)
        fraction[pair[0]] += sign * cells.fill
        if pair[1] != MEDIUM:
            fraction[pair[1]] -= cells.fill
        for region, part in _regions(cells, face, pair):
            regions.setdefault(region, []).append(part)
            moments[region] = moments.get(region, 0.0) + sign * cells.moment
        for neighbour, part in _by_neighbour(cells, face, pair):
            between.setdefault((pair[0], neighbour), []).append(part)
    fraction = np.clip(fraction, 0.0, 1.0)
    fraction[fraction >= FULL] = 1.0
    fill = np.minimum(fraction.sum(axis=0), 1.0)
    fill[fill >= FULL] = 1.0
    surfaces = tuple(_joined(*pair, parts) for pair, parts in between.items())
    if all(face.beyond is None for face in shape.solid.interfaces):
        closed = surfaces
    else:
        closed = tuple(_joined(*pair, parts) for pair, parts in regions.items())
    return Cut(fill, fraction, surfaces, closed, np.stack(list(moments.values())))


def _regions(
    cells: SurfaceCells, face: Interface, pair: tuple[int, int]
) -> Iterator[tuple[tuple[int, int], SurfaceCells]]:
    """Closed surfaces that a face is, or is a part of, with the materials on either side.

    Grains in touch are seen as a body of material 0 in which they replace it, so that what lies
    between two of them is met once.
    """
    if face.beyond is None:
        yield pair, cells
        return
    yield (0, MEDIUM), cells.only(np.array(face.beyond)[cells.piece] == MEDIUM)
    if face.inside != 0:
        yield (face.inside, 0), cells


def _by_neighbour(
    cells: SurfaceCells, face: Interface, pair: tuple[int, int]
) -> Iterator[tuple[int, SurfaceCells]]:
    """Parts of a surface by what is beyond, each surface between two grains only once."""
    if face.beyond is None:
        yield pair[1], cells
        return
    beyond = np.array(face.beyond)[cells.piece]
    for neighbour in sorted(set(face.beyond)):
        if neighbour < face.inside:
            yield neighbour, cells.only(beyond == neighbour)


def _joined(inside: int, outside: int, parts: list[SurfaceCells]) -> Surface:
    """Surfaces between the same materials as one; their pieces are numbered on."""
    first, pieces = 0, []
    for part in parts:
        pieces.append(part.piece + first)
        first = int(pieces[-1].max(initial=first - 1)) + 1
    return Surface(
        inside,
        outside,
        np.concatenate(pieces),
        np.concatenate([part.cell for part in parts]),
        np.concatenate([part.vector for part in parts]),
    )
