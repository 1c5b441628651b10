"""Centre, extents, mirror planes and cores of solids."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterloom.campaign.geometry import canonical, extents
from scatterloom.particle.polyhedron import prism
from scatterloom.particle.shapes import from_spec
from scatterloom.solids import placing
from scatterloom.solids.mesh import MEDIUM, Interface, Mesh, Solid
from scatterloom.solids.registry import GENERATORS
from solid_kit import block, globe, joined, mesh_of

TETRAHEDRON = np.array([[1.0, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]])


def one(mesh: Mesh, **more) -> Solid:
    return Solid((Interface(mesh),), **more)


def test_smallest_spheres():
    # regular tetrahedron: through its corners; flat one: through its longest edge
    middle, radius = placing.smallest_sphere(TETRAHEDRON + 3.0)
    np.testing.assert_allclose(middle, 3.0, rtol=1e-13)
    assert radius == pytest.approx(math.sqrt(3.0), rel=1e-13)
    middle, radius = placing.smallest_sphere(
        np.array([[-2.0, 0, 0], [2, 0, 0], [0, 0.5, 0], [0, 0, 0.5]])
    )
    np.testing.assert_allclose(middle, 0.0, atol=1e-13)
    assert radius == pytest.approx(2.0, rel=1e-13)


@settings(max_examples=50, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(4, 60))
def test_no_sphere_is_smaller(seed, count):
    """Optimal: all inside, and the centre in the hull of the points on the sphere."""
    points = np.random.default_rng(seed).normal(size=(count, 3))
    middle, radius = placing.smallest_sphere(points)
    away = np.linalg.norm(points - middle, axis=1)
    assert away.max() <= radius * (1 + 1e-12)
    # moving the centre in any direction brings it farther from a point on the sphere
    on = points[away > radius * (1 - 1e-9)] - middle
    directions = np.random.default_rng(1).normal(size=(500, 3))
    assert np.all((on @ directions.T).min(axis=0) <= 1e-6)


def test_centre_of_mass_unless_the_sphere_around_is_clearly_smaller():
    cube = one(block((1, 1, 1), (3, 3, 3)))
    np.testing.assert_allclose(placing.centre(cube), 2.0, atol=1e-12)
    # a thin rod on a large block reaches far from the centre of mass
    lolly = one(joined(block((-1, -1, -1), (1, 1, 1)), block((-0.1, -0.1, 1), (0.1, 0.1, 9))))
    np.testing.assert_allclose(placing.centre(lolly)[:2], 0.0, atol=1e-12)
    assert placing.centre(lolly)[2] == pytest.approx(
        placing.smallest_sphere(placing.outer_corners(lolly))[0][2]
    )
    # a heavier material is none: the centre is that of the volume
    outer, inner = block((0, 0, 0), (4, 2, 2)), block((0.5, 0.5, 0.5), (1.0, 1.0, 1.0))
    filled = Solid((Interface(outer), Interface(inner, 1, 0)))
    np.testing.assert_allclose(placing.centre(filled), [2, 1, 1], atol=1e-12)
    hollow = Solid((Interface(outer), Interface(inner, MEDIUM, 0)))
    np.testing.assert_allclose(
        placing.centre(hollow), (16 * np.array([2, 1, 1]) - 0.125 * 0.75) / 15.875, atol=1e-12
    )


def test_mirror_planes_are_found():
    def planes(mesh):
        return [placing.is_mirrored(one(mesh), axis) for axis in np.eye(3)]

    assert planes(block((-1, -2, -3), (1, 2, 3))) == [True] * 3
    assert planes(block((-1, -2, -2), (1, 2, 3))) == [True, True, False]
    assert planes(mesh_of(prism(5, 1.0))) == [False, True, True]
    # a cube that lost a corner keeps the planes through it
    corner = TETRAHEDRON[[0, 1, 2, 3]]
    faces = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]], dtype=np.int32)
    lean = Mesh(corner, faces, np.arange(4, dtype=np.int32))
    assert planes(lean) == [False] * 3
    for axis in ([1, 1, 0], [0, 1, -1]):
        assert placing.is_mirrored(one(lean), np.array(axis) / math.sqrt(2))
    assert placing.symmetry(one(lean)) == "none"
    assert placing.symmetry(one(block((-1, -2, -3), (1, 2, 3)))) == "mirrors"


def test_corners_alike_are_not_enough():
    """The corners of a cube, closed by a dent into one face whose edges break a plane."""
    cube = block((-1, -1, -1), (1, 1, 1))
    kept = np.flatnonzero(cube.corners[cube.triangles].mean(axis=1)[:, 2] < 0.99)
    ring = [np.flatnonzero((cube.corners == [x, y, 1]).all(axis=1))[0]
            for x, y in ((-1, -1), (1, -1), (1, 1), (-1, 1))]  # fmt: skip
    corners = np.concatenate([cube.corners, [[0.0, 0.0, 0.0]]])

    def dented(order) -> Mesh:
        lid = [(ring[i], ring[(i + 1) % 4], 8) for i in order]
        triangles = np.array([*cube.triangles[kept], *lid], dtype=np.int32)
        return Mesh(corners, triangles, np.zeros(len(triangles), dtype=np.int32))

    x, _, z = np.eye(3)
    even = one(dented(range(4)))
    assert placing.is_mirrored(even, x) and not placing.is_mirrored(even, z)
    # one side of the pit is turned over: the pit's edge runs along one diagonal only
    skew = dented((0, 1))
    lid = [(ring[2], ring[3], ring[0]), (ring[0], 8, ring[2])]
    skew = Mesh(corners, np.array([*skew.triangles, *lid], dtype=np.int32),
                np.zeros(len(skew.triangles) + 2, dtype=np.int32))  # fmt: skip
    assert np.abs(skew.area_vectors.sum(axis=0)).max() < 1e-12  # closed
    assert not placing.is_mirrored(one(skew), x)


def test_a_stated_symmetry_is_believed():
    ball = one(globe(1), symmetry="sphere")
    assert placing.symmetry(ball) == "sphere"
    moved = one(globe(2).moved(np.array([0.0, 0.0, 0.3])), symmetry="axial")
    assert placing.is_mirrored(moved, np.array([0.0, 0.0, 1.0]))


@pytest.fixture
def lump(monkeypatch):
    """A kind of shape made of triangles: an ellipsoid that is not about the origin."""
    made = []

    def make(spec):
        made.append(dict(spec))
        return one(globe(2, spec["axes"]).moved(np.array([5.0, 0.0, 0.0])))

    monkeypatch.setitem(GENERATORS, "lump", make)
    return made


def test_shapes_of_the_registry(lump):
    spec = {"kind": "lump", "axes": [3.0, 2.0, 1.00000000000001], "core_radius_fraction": 0.5}
    assert canonical(spec) == {"kind": "lump", "axes": [3.0, 2.0, 1.0], "core_radius_fraction": 0.5}
    spec = canonical(spec)
    shape, reach = from_spec(spec), extents(spec)
    assert reach.half == pytest.approx(shape.half_extents, rel=1e-14)
    assert reach.circumscribed_radius == shape.circumscribed_radius
    assert reach.half[0] / reach.half[1] == pytest.approx(1.5, rel=1e-12)
    assert extents(spec).mirror_planes == 3 and shape.symmetry == "mirrors"
    # generators see the shape alone, once
    assert lump == [{"kind": "lump", "axes": [3.0, 2.0, 1.0]}]
    outer, core = (face.mesh for face in shape.solid.interfaces)
    assert outer.volume == pytest.approx(4 * math.pi / 3, rel=1e-12)
    assert core.volume == pytest.approx(math.pi / 6, rel=1e-12)
    assert shape.solid.materials == 2
    assert shape.bounds(np.eye(3))[1] == pytest.approx(reach.half)


def test_cores_that_would_stick_out_are_refused(monkeypatch):
    pit = joined(block((-1, -1, -1), (1, 1, 1)), block((2, -1, -1), (3, 1, 1)))
    monkeypatch.setitem(GENERATORS, "pair", lambda spec: one(pit))
    with pytest.raises(ValueError, match="would stick out"):
        from_spec({"kind": "pair", "core_radius_fraction": 0.5})
    shell = Solid((Interface(globe(1)), Interface(globe(1, (0.5,) * 3), MEDIUM, 0)))
    monkeypatch.setitem(GENERATORS, "shell", lambda spec: shell)
    with pytest.raises(ValueError, match="one material without hollows"):
        from_spec({"kind": "shell", "core_radius_fraction": 0.5})
    with pytest.raises(ValueError, match="unknown shape kind 'torus'"):
        from_spec({"kind": "torus"})
