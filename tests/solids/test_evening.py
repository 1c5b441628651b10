"""Rounding of files taken back: mirror planes and faces along the lattice are found again."""

import numpy as np
import pytest

from scatterloom.particle.lattice import lattice
from scatterloom.particle.polyhedron import prism
from scatterloom.particle.shapes import from_spec
from scatterloom.solids.evening import evened
from scatterloom.solids.mesh import Mesh
from solid_kit import globe, mesh_of, shape_of


def rounded(mesh: Mesh) -> Mesh:
    """Away from the origin and in single precision, as an STL file holds it."""
    corners = (mesh.corners * 0.737 + [0.211, -0.347, 0.519]).astype(np.float32)
    return Mesh(corners.astype(np.float64), mesh.triangles, mesh.piece)


@pytest.mark.parametrize(
    "mesh", [mesh_of(prism(6, 1.5)), globe(3, (1.5, 1.2, 1.0))], ids=["column", "ellipsoid"]
)
def test_mirror_planes_are_found_again(mesh):
    spoilt = rounded(mesh)
    assert shape_of(spoilt).symmetry == "none"
    even = evened(spoilt)
    assert shape_of(even).symmetry == "mirrors"
    assert np.abs(even.corners - spoilt.corners).max() < 4e-6 * np.ptp(spoilt.corners)
    again = evened(even)
    np.testing.assert_allclose(again.corners, even.corners, atol=1e-15)


def test_faces_end_on_the_lattice_again():
    cube = from_spec({"kind": "cuboid", "edges": [1, 1, 1]})
    plain = mesh_of(cube.body)
    off = np.random.default_rng(2).uniform(-1e-7, 1e-7, plain.corners.shape)
    spoilt = Mesh(plain.corners + off, plain.triangles, plain.piece)
    before, after = (lattice(shape_of(mesh), 8) for mesh in (spoilt, evened(spoilt)))
    assert before.mirrors == (False,) * 3 and after.mirrors == (True,) * 3
    # the edges differ in the seventh digit, but each of the longest ends with the lattice
    assert len(after.cell) == 512 and after.fill.min() > 1.0 - 1e-6
    assert np.mean(after.fill == 1.0) > np.mean(before.fill == 1.0)


def test_a_body_without_planes_gets_none():
    rng = np.random.default_rng(4)
    ball = globe(2)
    lump = Mesh(ball.corners * rng.uniform(0.9, 1.1, (len(ball.corners), 1)), ball.triangles,
                ball.piece)  # fmt: skip
    even = evened(lump)
    assert shape_of(even).symmetry == "none"
    assert np.abs(even.corners - lump.corners).max() <= 1e-6 * np.ptp(lump.corners)
    # a body of double precision without coincidences is not touched at all
    shaken = Mesh(np.round(lump.corners * 64) / 64, lump.triangles, lump.piece)
    np.testing.assert_array_equal(evened(shaken).corners, shaken.corners)
