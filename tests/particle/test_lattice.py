"""Lattices of ellipsoids: volume, symmetry, normals, box."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

SPHERE = from_spec({"kind": "sphere"})
OBLATE = from_spec({"kind": "spheroid", "equatorial_to_polar": 2.0})
PROLATE = from_spec({"kind": "spheroid", "equatorial_to_polar": 0.5})
TRIAXIAL = from_spec({"kind": "ellipsoid", "axes": [3.0, 2.1, 1.0]})


def dense(cells):
    """Fill and normal on the whole box."""
    fill = np.zeros(cells.box)
    normal = np.zeros((*cells.box, 3))
    where = tuple(cells.cell.T)
    fill[where] = cells.fill
    normal[where] = cells.normal
    return fill, normal


@pytest.mark.parametrize("shape", [SPHERE, OBLATE, PROLATE, TRIAXIAL], ids=lambda s: s.axes)
@pytest.mark.parametrize("cells_across", [1, 2, 7, 12, 32])
def test_volume_and_box(shape, cells_across):
    cells = lattice(shape, cells_across)
    volume = cells.fill.sum() * cells.spacing**3
    assert volume == pytest.approx(shape.volume, rel=1e-9)
    assert cells.spacing * cells_across == pytest.approx(2 * shape.circumscribed_radius, rel=1e-15)
    for count, half in zip(cells.box, shape.half_axes, strict=True):
        assert count % 2 == 0
        # holds the axis, and no layer of the box stays empty
        assert (count / 2 - 1) * cells.spacing < half <= count / 2 * cells.spacing * (1 + 1e-12)
    # the centroid is the centre
    assert np.abs(cells.fill @ cells.centre()).max() < 1e-12 * len(cells.fill)


@settings(max_examples=40, deadline=None)
@given(
    axes=st.tuples(*[st.floats(0.2, 5.0)] * 3),
    cells_across=st.integers(1, 20),
)
def test_any_ellipsoid(axes, cells_across):
    shape = from_spec({"kind": "ellipsoid", "axes": axes})
    cells = lattice(shape, cells_across)
    assert cells.fill.sum() * cells.spacing**3 == pytest.approx(shape.volume, rel=1e-9)
    assert np.all((cells.fill > 0) & (cells.fill <= 1))
    length = np.linalg.norm(cells.normal, axis=1)
    np.testing.assert_allclose(length[cells.fill < 1], 1.0, rtol=1e-12)
    assert np.all(length[cells.fill == 1] == 0.0)
    # C order of (i, j, k)
    flat = np.ravel_multi_index(tuple(cells.cell.T), cells.box)
    assert np.all(np.diff(flat) > 0)
    # mirrors to the last bit
    fill, normal = dense(cells)
    for axis in range(3):
        assert np.array_equal(np.flip(fill, axis), fill)
        mirrored = np.flip(normal, axis).copy()
        mirrored[..., axis] *= -1
        assert np.array_equal(mirrored, normal)


def test_single_cell_corner():
    # one cell across: eight cells, an eighth of the particle in each
    cells = lattice(SPHERE, 1)
    assert cells.box == (2, 2, 2)
    np.testing.assert_allclose(cells.fill, math.pi / 6 / 8, rtol=1e-12)
    np.testing.assert_allclose(np.abs(cells.normal), 1 / math.sqrt(3), rtol=1e-12)
    np.testing.assert_array_equal(np.sign(cells.normal), np.sign(cells.centre()))


def test_two_cells_of_an_ellipsoid_in_closed_form():
    # The octant of an ellipsoid in one cell: the surface vector closes the three
    # quarter ellipses, so it goes like (b c, c a, a b).
    cells = lattice(TRIAXIAL, 2)
    a, b, c = TRIAXIAL.half_axes
    expected = np.array([b * c, c * a, a * b])
    expected /= np.linalg.norm(expected)
    np.testing.assert_allclose(np.abs(cells.normal), np.broadcast_to(expected, (8, 3)), rtol=1e-12)


@pytest.mark.parametrize("shape", [SPHERE, OBLATE, TRIAXIAL], ids=lambda s: s.axes)
def test_normals_follow_the_gradient(shape):
    # The mean normal tends to the gradient of the ellipsoid's equation as the
    # cells shrink; over a cell the normal turns by at most its diagonal over the
    # smallest radius of curvature, min(axes)^2 / max(axes).
    cells = lattice(shape, 40)
    cut = cells.fill < 1
    gradient = cells.centre()[cut] / shape.half_axes**2
    gradient /= np.linalg.norm(gradient, axis=1, keepdims=True)
    cosine = np.sum(gradient * cells.normal[cut], axis=1)
    bend = math.sqrt(3) * cells.spacing * shape.half_axes.max() / shape.half_axes.min() ** 2
    assert cosine.min() > math.cos(min(bend, 1.5))
    # on average much closer: half of that or less
    assert np.mean(np.arccos(np.clip(cosine, -1, 1))) < bend / 2


def test_permuted_axes_permute_the_lattice():
    original = lattice(TRIAXIAL, 18)
    fill, normal = dense(original)
    turned = lattice(from_spec({"kind": "ellipsoid", "axes": [1.0, 3.0, 2.1]}), 18)
    turned_fill, turned_normal = dense(turned)
    np.testing.assert_allclose(turned_fill, np.transpose(fill, (2, 0, 1)), atol=1e-12)
    np.testing.assert_allclose(
        turned_normal, np.transpose(normal, (2, 0, 1, 3))[..., [2, 0, 1]], atol=1e-8
    )


def test_affine_image_of_the_sphere():
    # A 1:2 spheroid on n cells is the sphere squeezed: pairs of the sphere's cells
    # of half the edge along z make one of the spheroid's.
    sphere_fill, _ = dense(lattice(SPHERE, 24))
    oblate_fill, _ = dense(lattice(OBLATE, 24))
    assert oblate_fill.shape == (24, 24, 12)
    paired = 0.5 * (sphere_fill[:, :, ::2] + sphere_fill[:, :, 1::2])
    np.testing.assert_allclose(oblate_fill, paired, atol=1e-12)


def test_symmetry_is_passed_on():
    assert [lattice(s, 4).symmetry for s in (SPHERE, OBLATE, TRIAXIAL)] == [
        "sphere",
        "axial",
        "mirrors",
    ]
    assert lattice(SPHERE, 4).mirrors == (True, True, True)


def test_no_cells_refused():
    with pytest.raises(ValueError, match="1 or more, found 0"):
        lattice(SPHERE, 0)
