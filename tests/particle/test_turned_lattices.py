"""Lattices turned or shifted against the particle, polyhedra and nested bodies."""

import math

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from scipy import integrate
from scipy.spatial import ConvexHull, HalfspaceIntersection
from scipy.spatial.transform import Rotation

from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

SPHERE = {"kind": "sphere"}
OBLATE = {"kind": "spheroid", "equatorial_to_polar": 2.0}
TRIAXIAL = {"kind": "ellipsoid", "axes": [3.0, 2.1, 1.0]}
CUBE = {"kind": "cuboid", "edges": [1, 1, 1]}
BRICK = {"kind": "cuboid", "edges": [1, 0.77, 0.53]}
COLUMN = {"kind": "prism", "sides": 6, "height_to_width": 1.5}
TRIANGLE = {"kind": "prism", "sides": 3, "height_to_width": 0.5}
TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()
SHIFT = (0.3, 0.0, 0.7)

SPECS = st.one_of(
    st.just(SPHERE),
    st.tuples(*[st.floats(0.3, 3.0)] * 3).map(lambda a: {"kind": "ellipsoid", "axes": a}),
    st.tuples(*[st.floats(0.3, 3.0)] * 3).map(lambda a: {"kind": "cuboid", "edges": a}),
    st.builds(
        lambda n, r: {"kind": "prism", "sides": n, "height_to_width": r},
        st.integers(3, 8),
        st.floats(0.2, 4.0),
    ),
)
VECTORS = st.tuples(*[st.floats(-3.0, 3.0)] * 3)


@settings(max_examples=60, deadline=None)
@given(spec=SPECS, turn=VECTORS, shift=VECTORS, cells=st.integers(1, 14), core=st.floats(0.1, 0.95))
@example(spec=SPHERE, turn=(0.0, 0.0, 0.0), shift=(1.5, 0.5, 0.5), cells=1, core=0.5)
@example(spec=SPHERE, turn=(0.0, 0.0, 2.0), shift=(0.5, 0.25, 1.5), cells=2, core=0.25)
def test_volumes_and_closed_surfaces(spec, turn, shift, cells, core):
    shape = from_spec({**spec, "core_radius_fraction": core})
    rotation = Rotation.from_rotvec(turn).as_matrix()
    grid = lattice(shape, cells, rotation, shift)
    volumes = grid.fraction.sum(axis=1) * grid.spacing**3 / shape.volume
    # cells fuller than 1 - 1e-12 count as full, and those below 1e-9 are left out
    np.testing.assert_allclose(volumes, [1 - core**3, core**3], atol=1e-9)
    np.testing.assert_allclose(grid.fraction.sum(axis=0), grid.fill, atol=1e-12)
    assert np.all(grid.fraction >= 0.0) and np.all(grid.fill <= 1.0)
    # the box holds the particle
    assert np.all(grid.cell.min(axis=0) >= 0) and np.all(grid.cell.max(axis=0) < grid.box)
    reach = np.linalg.norm(grid.centre(), axis=1).max()
    assert reach < shape.circumscribed_radius + math.sqrt(3) / 2 * grid.spacing
    # every surface is closed: its area vectors add to zero
    for part in ((0, -1), (1, 0)):
        chosen = [i for i, pair in enumerate(grid.interfaces) if pair == part]
        total = grid.area_vector[chosen].sum(axis=(0, 1))
        # (a core within one cell has no mean normal at all: what is left is rounding)
        assert np.abs(total).max() <= 1e-6 * np.abs(grid.area_vector[chosen]).sum() + 1e-13


@pytest.mark.parametrize("spec", [SPHERE, OBLATE, TRIAXIAL], ids=lambda s: s["kind"])
def test_turned_code_on_an_aligned_lattice(spec):
    """A rotation by nothing takes the way of turned ellipsoids once the lattice is shifted."""
    shape = from_spec(spec)
    plain = lattice(shape, 14)
    # a whole cell is no shift; the least shift there is goes through the other code
    moved = lattice(shape, 14, offset=(1e-13, 0.0, 0.0))
    assert plain.origin is None and moved.origin is not None
    at = {tuple(c): i for i, c in enumerate(plain.cell.tolist())}
    low = np.array(plain.box) / 2 - np.array(moved.origin)
    kept = [at[tuple(c)] for c in np.round(moved.cell + low).astype(int).tolist()]
    assert sorted(kept) == list(range(len(plain.cell)))
    np.testing.assert_allclose(moved.fill, plain.fill[kept], atol=1e-11)
    np.testing.assert_allclose(moved.area, plain.area[kept], atol=1e-10)
    # normals of cells that the surface hardly touches are less certain
    np.testing.assert_allclose(moved.area_vector[0], plain.area_vector[0][kept], atol=1e-10)


def sphere_of_cells(grid):
    """Fill of the cells of a unit sphere from nested adaptive quadrature along z."""

    def fill(position):
        x, y, z = position
        half = grid.spacing / 2

        def height(v, u):
            rest = 1.0 - u * u - v * v
            top = math.sqrt(rest) if rest > 0 else 0.0
            return max(0.0, min(z + half, top) - max(z - half, -top))

        value, _ = integrate.dblquad(
            height, x - half, x + half, y - half, y + half, epsabs=1e-8, epsrel=1e-7
        )
        return value / grid.spacing**3

    return fill


def test_shifted_sphere_against_quadrature():
    grid = lattice(from_spec(SPHERE), 7, offset=(0.31, 0.12, 0.77))
    fill = sphere_of_cells(grid)
    cut = np.flatnonzero(grid.fill < 1)[::17]
    expected = [fill(position) for position in grid.centre()[cut]]
    np.testing.assert_allclose(grid.fill[cut], expected, atol=2e-6)


def test_turned_sphere_is_the_sphere():
    plain, turned = lattice(from_spec(SPHERE), 12), lattice(from_spec(SPHERE), 12, TURN)
    np.testing.assert_array_equal(turned.cell, plain.cell)
    np.testing.assert_allclose(turned.fill, plain.fill, atol=1e-11)
    np.testing.assert_allclose(turned.normal, plain.normal, atol=1e-7)
    assert turned.mirrors == plain.mirrors == (True, True, True)


def test_turned_ellipsoid_against_samples():
    """Fill counted on 60^3 points of a cell errs by about a surface layer's noise, 1e-3."""
    shape = from_spec(TRIAXIAL)
    grid = lattice(shape, 9, TURN, SHIFT)
    steps = (np.arange(60) + 0.5) / 60 - 0.5
    inner = grid.spacing * np.stack(np.meshgrid(steps, steps, steps), axis=-1).reshape(-1, 3)
    cut = np.flatnonzero(grid.fill < 1)[::9]
    for one in cut:
        points = (grid.centre()[one] + inner) @ TURN  # back to the particle frame
        counted = np.mean(np.sum((points / shape.half_axes) ** 2, axis=1) < 1)
        assert grid.fill[one] == pytest.approx(counted, abs=3e-3)
    # normals follow the gradient of the quadric
    gradient = (grid.centre()[cut] @ TURN / shape.half_axes**2) @ TURN.T
    cosine = np.sum(gradient * grid.normal[cut], axis=1) / np.linalg.norm(gradient, axis=1)
    assert np.median(cosine) > 0.98


@pytest.mark.parametrize("spec", [CUBE, BRICK, COLUMN, TRIANGLE], ids=lambda s: str(s))
@pytest.mark.parametrize("turn", [None, TURN], ids=["aligned", "turned"])
def test_polyhedra_against_half_space_intersection(spec, turn):
    """Cut cells against the general-purpose intersection of scipy (Qhull)."""
    shape = from_spec(spec)
    grid = lattice(shape, 6, turn, SHIFT)
    normals, distances = shape.body.planes
    normals = normals if turn is None else normals @ turn.T
    cube = np.concatenate([np.eye(3), -np.eye(3)])
    cut = np.flatnonzero(grid.fill < 1)[::3]
    assert len(cut) > 5
    for one in cut:
        centre = grid.centre()[one]
        planes = np.concatenate(
            [
                np.column_stack([cube, -(cube @ centre) - grid.spacing / 2]),
                np.column_stack([normals, -distances]),
            ]
        )
        # a point inside: the cell's centre drawn towards that of the particle
        inside = chebyshev(planes)
        if inside is None:
            assert grid.fill[one] < 1e-3
            continue
        volume = ConvexHull(HalfspaceIntersection(planes, inside).intersections).volume
        assert grid.fill[one] == pytest.approx(volume / grid.spacing**3, abs=1e-9)


def chebyshev(planes):
    """Centre of the largest ball within half spaces, or None if it is tiny."""
    from scipy.optimize import linprog

    norm = np.linalg.norm(planes[:, :3], axis=1)
    found = linprog(
        [0, 0, 0, -1],
        A_ub=np.column_stack([planes[:, :3], norm]),
        b_ub=-planes[:, 3],
        bounds=[(None, None)] * 3 + [(0, None)],
    )
    return found.x[:3] if found.success and found.x[3] > 1e-3 else None


def test_surface_area_of_polyhedra():
    for spec in (CUBE, COLUMN, TRIANGLE):
        shape = from_spec(spec)
        grid = lattice(shape, 11, TURN, SHIFT)
        found = np.linalg.norm(grid.area_vector, axis=2).sum(axis=1) * grid.spacing**2
        expected = np.linalg.norm(shape.body.area_vectors, axis=1)
        np.testing.assert_allclose(found, expected, rtol=1e-9)


@pytest.mark.parametrize("spec", [BRICK, COLUMN, TRIANGLE], ids=lambda s: str(s))
@pytest.mark.parametrize("turn", [None, TURN], ids=["aligned", "turned"])
def test_first_moments(spec, turn):
    """The moments of the cells put together give the centroid, which is the centre."""
    grid = lattice(from_spec({**spec, "core_radius_fraction": 0.5}), 9, turn, SHIFT)
    fraction = np.cumsum(grid.fraction[::-1], axis=0)[::-1]  # inside each outer interface
    for fill, moment in zip(fraction, grid.composition.moment, strict=True):
        assert np.abs(moment[fill == 1.0]).max(initial=0.0) < 1e-11
        total = fill @ (grid.centre() / grid.spacing) + moment.sum(axis=0)
        assert np.abs(total).max() < 1e-6 * fill.sum()
        # no part of a cell is farther from its centre than half a cell
        assert np.all(np.abs(moment) <= 0.5 * fill[:, None] + 1e-12)
    # a face along the lattice that fills the fraction f: f (1 - f)/2 inwards
    brick = lattice(from_spec(BRICK), 8)
    flat = np.flatnonzero((brick.cell[:, 2] == 0) & np.all(brick.cell[:, :2] == 4, axis=1))
    (f,) = brick.fill[flat]
    assert 0.1 < f < 0.9
    np.testing.assert_allclose(
        brick.composition.moment[0, flat], [[0.0, 0.0, f * (1 - f) / 2]], atol=1e-12
    )


def test_cube_with_faces_on_the_lattice_has_only_full_cells():
    grid = lattice(from_spec(CUBE), 8)
    assert grid.box == (8, 8, 8) and len(grid.cell) == 512
    assert np.all(grid.fill == 1.0)
    # each face belongs to the layer of cells inside it
    sizes = np.linalg.norm(grid.area_vector, axis=2)
    np.testing.assert_allclose(sizes.sum(axis=1), 64.0, rtol=1e-9)
    edge = np.count_nonzero((grid.cell == 0) | (grid.cell == 7), axis=1)
    np.testing.assert_allclose(sizes.sum(axis=0), edge, atol=1e-9)
    # turned by a right angle it is the same
    quarter = Rotation.from_rotvec([0, 0, math.pi / 2]).as_matrix()
    turned = lattice(from_spec(CUBE), 8, quarter)
    assert np.all(turned.fill == 1.0) and turned.box == grid.box
    # half a cell aside the outer layer is half full
    moved = lattice(from_spec(CUBE), 8, offset=(0.5, 0.0, 0.0))
    assert moved.box == (9, 8, 8)
    assert sorted(set(np.round(moved.fill, 12))) == [0.5, 1.0]


def test_mirror_planes_are_those_of_lattice_and_particle():
    about_z = Rotation.from_rotvec([0, 0, 0.4]).as_matrix()

    def planes(spec, *place):
        return lattice(from_spec(spec), 6, *place).mirrors

    assert planes(COLUMN) == planes(CUBE) == (True, True, True)
    assert planes(TRIANGLE) == (False, True, True)
    assert planes(OBLATE, about_z) == (True, True, True)
    assert planes(TRIAXIAL, about_z) == planes(CUBE, about_z) == (False, False, True)
    assert planes(OBLATE, TURN) == planes(BRICK, TURN) == (False, False, False)
    assert planes(OBLATE, None, SHIFT) == (False, True, False)
    # whole cells are no shift
    assert planes(OBLATE, None, (1.0, -2.0, 0.0)) == (True, True, True)


@pytest.mark.parametrize("spec", [CUBE, COLUMN, TRIANGLE, TRIAXIAL], ids=lambda s: str(s))
def test_declared_mirror_planes_are_there(spec):
    grid = lattice(from_spec({**spec, "core_radius_fraction": 0.6}), 7)
    dense = np.zeros((2, *grid.box))
    dense[(slice(None), *grid.cell.T)] = grid.fraction
    for axis in np.flatnonzero(grid.mirrors):
        np.testing.assert_allclose(np.flip(dense, axis + 1), dense, atol=1e-11)


def test_symmetry_is_that_of_the_shape():
    specs = {"mirrors": [CUBE, BRICK, COLUMN], "none": [TRIANGLE], "axial": [OBLATE]}
    for symmetry, examples in specs.items():
        for spec in examples:
            assert lattice(from_spec(spec), 5, TURN).symmetry == symmetry


def test_composition_only_where_it_is_needed():
    assert lattice(from_spec(OBLATE), 6, TURN).composition is None
    assert lattice(from_spec(CUBE), 6).interfaces == ((0, -1),) * 6
    coated = lattice(from_spec({**OBLATE, "core_radius_fraction": 0.5}), 6)
    assert coated.interfaces == ((0, -1), (1, 0))
    plain = lattice(from_spec(OBLATE), 6)
    np.testing.assert_array_equal(coated.fill, plain.fill)
    np.testing.assert_array_equal(coated.area_vector[0], plain.area_vector[0])
    np.testing.assert_array_equal(plain.fraction, plain.fill[None])


def test_faces_that_cancel_have_no_mean_normal():
    # a plate a fifth of a cell thick, in the middle of a layer of cells
    plate = from_spec({"kind": "cuboid", "edges": [10.0, 10.0, 1.0]})
    grid = lattice(plate, 2, offset=(0.0, 0.0, 0.5))
    assert grid.box[2] == 1
    np.testing.assert_allclose(grid.fill, 0.2, rtol=1e-10)
    # only the rim, on faces of the cells, has a mean normal
    assert not grid.normal[:, 2].any()
    # but both faces are there
    sizes = np.abs(grid.area_vector[:, :, 2]).sum(axis=0)
    np.testing.assert_allclose(sizes, 2.0, rtol=1e-10)


@pytest.mark.parametrize(
    ("rotation", "message"),
    [(np.eye(2), "3 x 3"), (1.1 * np.eye(3), "orthogonal"), (-np.eye(3), "reflection")],
)
def test_what_is_no_rotation_is_refused(rotation, message):
    with pytest.raises(ValueError, match=message):
        lattice(from_spec(CUBE), 4, rotation)
