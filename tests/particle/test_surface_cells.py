"""Cells of closed surfaces: convex bodies clipped another way, balls in closed form, boxes."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from scatterloom.particle.ball import ball_overlap
from scatterloom.particle.clipping import polyhedron_overlap
from scatterloom.particle.polyhedron import Polyhedron, cuboid, prism
from scatterloom.particle.surface_cells import surface_cells
from scatterloom.solids.mesh import Mesh
from solid_kit import block, globe, joined, mesh_of, reversed_mesh

TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()
BODIES = {"cube": cuboid((1, 1, 1)), "brick": cuboid((1, 0.7, 0.3)), "column": prism(6, 1.5)}
CYCLE = np.array([[0.0, 0.0, 1.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]])
"""Takes x, y, z to y, z, x."""


def table(cells, pieces, box):
    """Area vectors of every piece in the whole box."""
    out = np.zeros((pieces, *box, 3))
    out.reshape(pieces, -1, 3)[cells.piece, cells.cell] = cells.vector
    return out


@pytest.mark.parametrize("shift", [(0, 0, 0), (0.5, 0, 0), (0.3, 0.1, 0.7)], ids=str)
@pytest.mark.parametrize("turn", [np.eye(3), TURN], ids=["aligned", "turned"])
@pytest.mark.parametrize("scale", [3.0, 5.3])
@pytest.mark.parametrize("body", BODIES)
def test_convex_polyhedra_as_clipped_by_planes(body, scale, turn, shift):
    body = Polyhedron(BODIES[body].corners @ turn.T * scale, BODIES[body].faces)
    origin = math.ceil(np.abs(body.corners).max()) + np.array(shift)
    box = (2 * int(origin.max()) + 1,) * 3
    fill, facet, moment = polyhedron_overlap(body, origin, box)
    cells = surface_cells(mesh_of(body), origin, box)
    # the clipping lets faces of cells reach 1e-11 farther
    np.testing.assert_allclose(cells.fill, fill, rtol=0, atol=1e-10)
    np.testing.assert_allclose(cells.moment, moment, rtol=0, atol=1e-10)
    expected = facet[..., None] * body.planes[0][:, None, None, None, :]
    np.testing.assert_allclose(table(cells, len(facet), box), expected, rtol=0, atol=1e-10)
    # every face lies in the same cells, also where it lies on faces of cells
    assert cells.fill.sum() == pytest.approx(body.volume, rel=1e-12)


def test_triangulated_balls_tend_to_the_ball():
    """Deviations of corners on the ball fall with the square of the triangles' edges."""
    spacing, origin, box = 0.31, np.array([3.7, 3.9, 4.2]), (8, 8, 8)
    fill, area = ball_overlap(spacing * np.eye(3), origin, box)
    errors = []
    for finesse in (2, 3, 4):
        ball = globe(finesse)
        # of the ball's volume, or volumes would differ as much as the shapes
        ball = ball.moved(np.zeros(3), (4 * math.pi / 3 / ball.volume) ** (1 / 3) / spacing)
        cells = surface_cells(ball, origin, box)
        vector = table(cells, 1, box)[0]
        errors.append((np.abs(cells.fill - fill).max(), np.abs(vector - area).max()))
    errors = np.array(errors)
    # The coarsest triangles have edges of 0.33 radii at most, so the ball rises above them by
    # 0.33**2 / 6 radii, and the surface of a cell moves by that along its outline at most.
    rise = 0.33**2 / 6 / spacing
    assert errors[0, 0] < rise and errors[0, 1] < 2.0 * rise
    np.testing.assert_allclose(errors[:-1] / errors[1:], 4.0, rtol=0.35)


@st.composite
def lumps(draw) -> Mesh:
    """A bumpy ball with a hollow and a crumb beside it: dents, two parts, and a cavity."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    ball = globe(1)
    lump = Mesh(ball.corners * rng.uniform(1.6, 3.0, (42, 1)), ball.triangles, ball.piece)
    hollow = reversed_mesh(ball.moved(np.zeros(3), 1.2))
    crumb = block((3.0, 0.0, -1.0), (3.0 + rng.uniform(0.1, 2.0), 1.0, 0.0))
    return joined(lump, hollow, crumb)


@settings(max_examples=25, deadline=None)
@given(lumps(), st.tuples(*[st.sampled_from([0.0, 0.25, 0.5, 0.731])] * 3))
def test_nothing_is_lost_and_no_axis_is_special(mesh, shift):
    box, origin = (9, 8, 7), np.array([3.0, 3.0, 3.0]) + shift
    cells = surface_cells(mesh, origin, box)
    assert np.all((cells.fill >= 0.0) & (cells.fill <= 1.0))
    assert cells.fill.sum() == pytest.approx(mesh.volume, rel=1e-12)
    place = np.stack(np.indices(box), axis=-1) + 0.5 - origin
    first = np.sum(cells.fill[..., None] * place + cells.moment, axis=(0, 1, 2))
    np.testing.assert_allclose(first, mesh.volume * mesh.centroid, atol=1e-10)
    # closed: the area vectors of all cells add to nothing
    np.testing.assert_allclose(cells.vector.sum(axis=0), 0.0, atol=1e-11)
    # columns along x and y instead of z
    turn, other, back = np.eye(3), box, (0, 1, 2)
    for _ in range(2):
        turn, other, back = CYCLE @ turn, (other[2], *other[:2]), (back[1], back[2], back[0])
        again = surface_cells(mesh.turned(turn), turn @ origin, other)
        np.testing.assert_allclose(again.fill.transpose(back), cells.fill, atol=1e-12)
        moment = (again.moment @ turn).transpose(*back, 3)
        np.testing.assert_allclose(moment, cells.moment, atol=1e-12)


def test_each_cell_is_closed_by_its_faces():
    """Divergence theorem in every cell: the volume of the part from its own pieces, by hand."""
    # a wedge through one cell: half of it, centre of mass at a third (measured from the corner)
    corners = np.array([(0, 0, 0), (1, 0, 0), (0, 0, 1), (0, 1, 0), (1, 1, 0), (0, 1, 1)], float)
    faces = ((0, 1, 2), (3, 5, 4), (0, 3, 4, 1), (0, 2, 5, 3), (1, 4, 5, 2))
    wedge = mesh_of(Polyhedron(corners, faces))
    cells = surface_cells(wedge, np.zeros(3), (1, 1, 1))
    assert cells.fill[0, 0, 0] == pytest.approx(0.5, rel=1e-15)
    # offset of the centre of mass from the centre of the cell, times the volume
    np.testing.assert_allclose(cells.moment[0, 0, 0], [-1 / 12, 0.0, -1 / 12], atol=1e-15)
    expected = [(0, -0.5, 0), (0, 0.5, 0), (0, 0, -1), (-1, 0, 0), (1, 0, 1)]
    np.testing.assert_allclose(table(cells, 5, (1, 1, 1))[:, 0, 0, 0], expected, atol=1e-15)


@pytest.mark.parametrize("hollow", [False, True])
def test_faces_on_the_lattice_belong_to_the_inner_side(hollow):
    box = (6, 6, 6)
    cells = surface_cells(block((1, 1, 1), (5, 4, 3)), np.zeros(3), box, hollow)
    assert np.array_equal(np.unique(cells.fill), [0.0, 1.0]) and cells.fill.sum() == 24.0
    assert not cells.moment.any()
    filled = cells.fill.ravel()[cells.cell] == 1.0
    # of a hollow the material is around it, and its surface looks inwards
    assert filled.all() if not hollow else not filled.any()
    place = np.stack(np.unravel_index(cells.cell, box), axis=1) + 0.5
    outwards = np.sum(cells.vector * (place - [3.0, 2.5, 2.0]), axis=1)
    assert np.all(outwards < 0.0 if hollow else outwards > 0.0)
    assert np.abs(cells.vector).sum() == 2 * (4 * 3 + 3 * 2 + 4 * 2)


def test_corners_within_rounding_of_the_lattice_cut_no_cell():
    exact = block((1, 1, 1), (5, 4, 3))
    rng = np.random.default_rng(3)
    shaken = Mesh(exact.corners + rng.uniform(-1e-12, 1e-12, exact.corners.shape),
                  exact.triangles, exact.piece)  # fmt: skip
    one, other = (surface_cells(mesh, np.zeros(3), (6, 6, 6)) for mesh in (exact, shaken))
    np.testing.assert_array_equal(one.fill, other.fill)
    np.testing.assert_array_equal(one.cell, other.cell)
    np.testing.assert_array_equal(one.vector, other.vector)
