"""Closed surfaces against the formulas for a tetrahedron and a hollow cube."""

import math

import numpy as np

from scatterloom.solids.mesh import MEDIUM, Interface, Mesh, Solid

CORNERS = np.array([[0.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 2.0, 0.0], [0.0, 0.0, 3.0]])
TRIANGLES = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]], dtype=np.int32)


def corner_of_a_box() -> Mesh:
    return Mesh(CORNERS, TRIANGLES, np.arange(4, dtype=np.int32))


def test_a_corner_cut_off_a_box() -> None:
    # Edges 1, 2, 3 meet at right angles: volume abc/6, centre of mass at a quarter of each,
    # and de Gua's theorem for the area of the slanting face.
    mesh = corner_of_a_box()
    assert mesh.volume == 1.0
    np.testing.assert_allclose(mesh.centroid, [0.25, 0.5, 0.75], rtol=1e-14)
    slanting = math.sqrt(1.0**2 + 3.0**2 + 1.5**2)
    assert math.isclose(mesh.area, 1.0 + 1.5 + 3.0 + slanting, rel_tol=1e-14)


def test_the_centre_of_mass_moves_along() -> None:
    mesh = corner_of_a_box().moved(np.array([5.0, -7.0, 11.0]), 2.0)
    assert math.isclose(mesh.volume, 8.0, rel_tol=1e-12)
    np.testing.assert_allclose(mesh.centroid, [10.5, -13.0, 23.5], rtol=1e-12)


def test_a_hollow_is_no_volume_and_a_filled_one_is() -> None:
    outer = corner_of_a_box()
    inner = outer.moved(np.array([0.1, 0.1, 0.1]), 0.5)
    hollow = Solid((Interface(outer), Interface(inner, MEDIUM, 0)))
    filled = Solid((Interface(outer), Interface(inner, 1, 0)))
    assert math.isclose(hollow.volume, 7.0 / 8.0, rel_tol=1e-14)
    assert math.isclose(filled.volume, 1.0, rel_tol=1e-14)
    assert (hollow.materials, filled.materials) == (1, 2)
    scaled = hollow.normalized(outer.centroid)
    assert math.isclose(scaled.volume, 4.0 * math.pi / 3.0, rel_tol=1e-14)
