"""Lattices of solids: those of the same polyhedra made otherwise, hollows, several materials."""

import math

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from scatterloom.dipole.mixture import particle_tensors
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solids.mesh import MEDIUM, Interface, Solid
from solid_kit import block, globe, mesh_of, shape_of

TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()
COLUMN = {"kind": "prism", "sides": 6, "height_to_width": 1.5}
BRICK = {"kind": "cuboid", "edges": [1, 0.77, 0.53]}


@pytest.mark.parametrize("core", [None, 0.6])
@pytest.mark.parametrize("turn", [None, TURN], ids=["aligned", "turned"])
@pytest.mark.parametrize("spec", [COLUMN, BRICK], ids=lambda s: s["kind"])
def test_a_polyhedron_of_triangles_is_the_polyhedron(spec, turn, core):
    spec = spec if core is None else {**spec, "core_radius_fraction": core}
    one = from_spec(spec)
    mesh = mesh_of(one.body)
    faces = [Interface(mesh)]
    if core is not None:
        faces.append(Interface(mesh.moved(np.zeros(3), core), 1, 0))
    other = shape_of(Solid(tuple(faces)))
    assert other.symmetry == one.symmetry
    assert other.circumscribed_radius == pytest.approx(one.circumscribed_radius, rel=1e-14)
    # nine cells: no corner of these on the lattice, where the clipping leaves crumbs of faces
    here, there = lattice(one, 9, turn), lattice(other, 9, turn)
    np.testing.assert_array_equal(here.cell, there.cell)
    assert (here.box, here.mirrors, here.interfaces) == (there.box, there.mirrors, there.interfaces)
    np.testing.assert_allclose(here.fraction, there.fraction, rtol=0, atol=1e-10)
    np.testing.assert_allclose(here.area_vector, there.area_vector, rtol=0, atol=1e-9)
    indices = [1.5 + 0.01j] if core is None else [1.5 + 0.01j, 1.8]
    tensors, again = (particle_tensors(grid, indices, 0.2) for grid in (here, there))
    scale = np.abs(tensors.root).max()
    np.testing.assert_allclose(again.root, tensors.root, rtol=0, atol=1e-8 * scale)


def test_crumbs_of_faces_change_no_tensor():
    # At 12 cells corners of the column lie on the lattice, and clipping by planes leaves facets
    # of 1e-11 that the triangles do not have.
    one = from_spec(COLUMN)
    here, there = lattice(one, 12), lattice(shape_of(Solid((Interface(mesh_of(one.body)),))), 12)
    assert here.composition is not None
    sizes = [np.linalg.norm(r.vector, axis=1) for r in here.composition.regions]
    assert any(np.any((size > 0.0) & (size < 1e-9)) for size in sizes)
    tensors, again = (particle_tensors(grid, [1.5 + 0.01j], 0.2) for grid in (here, there))
    scale = np.abs(tensors.root).max()
    np.testing.assert_allclose(again.root, tensors.root, rtol=0, atol=1e-8 * scale)


def test_a_hollow_is_medium_and_its_surface_one_of_the_material():
    outer = block((-3, -3, -3), (3, 3, 3))
    shape = shape_of(Solid((Interface(outer), Interface(block((-1, -1, -2), (1, 1, 2)), -1, 0))))
    grid = lattice(shape, 6)
    # faces of both lie on the lattice: 216 - 16 full cells, no cell in the hollow
    assert len(grid.cell) == 200 and np.all(grid.fill == 1.0)
    assert grid.mirrors == (True, True, True) and grid.symmetry == "mirrors"
    assert set(grid.interfaces) == {(0, MEDIUM)} and len(grid.interfaces) == 12
    # every face belongs to cells of the material
    areas = np.sort(np.linalg.norm(grid.area_vector, axis=2).sum(axis=1))
    np.testing.assert_allclose(areas, [4, 4, 8, 8, 8, 8, *[36] * 6], rtol=1e-12)
    # pieces of both surfaces in one list: seen from the material they add to nothing
    assert np.abs(grid.area_vector.sum(axis=(0, 1))).max() < 1e-12
    assert grid.fill.sum() * grid.spacing**3 == pytest.approx(4 * math.pi / 3, rel=1e-12)


def test_materials_side_by_side_and_within():
    # a block with a grain of material 1 inside and a bubble within the grain
    faces = (
        Interface(globe(2, (3.0, 3.0, 3.0))),
        Interface(block((-1.1, -1.2, -1.3), (1.4, 1.3, 1.2)), 1, 0),
        Interface(block((-0.4, -0.3, -0.5), (0.2, 0.6, 0.4)), MEDIUM, 1),
    )
    shape = shape_of(Solid(faces))
    grid = lattice(shape, 11, TURN, (0.2, 0.7, 0.4))
    assert set(grid.interfaces) == {(0, MEDIUM), (1, 0), (1, MEDIUM)}
    ball, grain, bubble = (face.mesh.volume for face in faces)
    unit = 4 * math.pi / 3 / (ball - bubble)
    held = grid.fraction.sum(axis=1) * grid.spacing**3
    np.testing.assert_allclose(held, [(ball - grain) * unit, (grain - bubble) * unit], rtol=1e-9)
    assert np.all(grid.fraction >= 0.0) and np.all(grid.fraction.sum(axis=0) <= 1.0 + 1e-12)
    np.testing.assert_allclose(grid.fraction.sum(axis=0), grid.fill, atol=1e-12)
    # equal indices: the grain leaves no trace
    alone = lattice(shape_of(Solid((faces[0], Interface(faces[2].mesh, MEDIUM, 0)))), 11, TURN,
                    (0.2, 0.7, 0.4))  # fmt: skip
    both = particle_tensors(grid, [1.6 + 0.1j] * 2, 0.2)
    plain = particle_tensors(alone, [1.6 + 0.1j], 0.2)
    scale = np.abs(plain.root).max()
    np.testing.assert_allclose(both.root, plain.root, rtol=0, atol=1e-9 * scale)
