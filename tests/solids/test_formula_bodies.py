"""Polyhedra, rounded ones, bodies of revolution, superellipsoids against closed formulas."""

import math

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from scatterloom.particle.ball import ball_overlap
from scatterloom.particle.surface_cells import surface_cells
from scatterloom.solids import placing
from scatterloom.solids.facets import faceted_mesh, hull_faces, hull_mesh
from scatterloom.solids.globe import sphere_mesh
from scatterloom.solids.polyhedra import indented_prism, regular, regular_corners, tilted_prism
from scatterloom.solids.registry import build
from scatterloom.solids.revolution import capsule, frustum
from scatterloom.solids.rounding import Rounded
from scatterloom.solids.superellipsoid import superellipsoid, superellipsoid_volume
from solid_kit import is_closed

ROOT5 = math.sqrt(5.0)
REGULAR = {
    # faces: volume / edge^3, area / edge^2, edges per face, dihedral angle (Coxeter, Regular
    # Polytopes, table I; from memory)
    4: (math.sqrt(2) / 12, math.sqrt(3), 3, math.acos(1 / 3)),
    6: (1.0, 6.0, 4, math.pi / 2),
    8: (math.sqrt(2) / 3, 2 * math.sqrt(3), 3, math.acos(-1 / 3)),
    12: ((15 + 7 * ROOT5) / 4, 3 * math.sqrt(25 + 10 * ROOT5), 5, math.acos(-1 / ROOT5)),
    20: (5 * (3 + ROOT5) / 12, 5 * math.sqrt(3), 3, math.acos(-ROOT5 / 3)),
}


def edge_of(corners) -> float:
    away = np.linalg.norm(corners[1:] - corners[0], axis=1)
    return float(away.min())


@pytest.mark.parametrize("faces", REGULAR)
def test_regular_polyhedra(faces):
    mesh, edge = regular(faces), edge_of(regular_corners(faces))
    volume, area, _, _ = REGULAR[faces]
    assert is_closed(mesh) and mesh.piece.max() + 1 == faces
    assert mesh.volume == pytest.approx(volume * edge**3, rel=1e-13)
    assert mesh.area == pytest.approx(area * edge**2, rel=1e-13)
    kind = {"kind": "polyhedron", "faces": faces}
    planes = sum(placing.is_mirrored(placing.placed(kind), axis) for axis in np.eye(3))
    assert planes == (2 if faces == 4 else 3)


@pytest.mark.parametrize("fraction", [0.05, 0.4, 0.95])
@pytest.mark.parametrize("faces", REGULAR)
def test_rounded_regular_polyhedra(faces, fraction):
    """Steiner's formula with the angles of the tables; edges shrink in proportion."""
    corners, polygons = hull_faces(regular_corners(faces))
    body = Rounded(corners, polygons, fraction)
    mesh = body.mesh()
    volume, area, sides, dihedral = REGULAR[faces]
    edge, r = edge_of(corners) * (1.0 - fraction), body.radius
    edges = faces * sides / 2
    bend = 0.5 * edges * edge * (math.pi - dihedral)
    expected = volume * edge**3 + area * edge**2 * r + bend * r**2 + 4 * math.pi / 3 * r**3
    surface = area * edge**2 + 2.0 * bend * r + 4 * math.pi * r**2
    assert body.steiner() == pytest.approx((expected, surface), rel=1e-10)
    assert is_closed(mesh) and mesh.piece.max() + 1 == faces
    # second order in the sagitta of 4e-4, and of first order for the area
    assert mesh.volume == pytest.approx(expected, rel=5e-6)
    assert mesh.area == pytest.approx(surface, rel=5e-4)


def test_rounded_edges_keep_mirror_planes():
    for spec, planes in (
        ({"kind": "polyhedron", "faces": 4, "edge_radius_fraction": 0.3}, 2),
        ({"kind": "shaped_prism", "sides": 6, "height_to_width": 1.0,
          "edge_radius_fraction": 0.2}, 3),
        ({"kind": "shaped_prism", "sides": 5, "height_to_width": 1.0,
          "edge_radius_fraction": 0.2}, 2),
    ):  # fmt: skip
        solid = placing.placed(spec)
        assert sum(placing.is_mirrored(solid, axis) for axis in np.eye(3)) == planes


@pytest.mark.parametrize("sides", [3, 6, 7])
def test_prisms_with_other_ends(sides):
    right = 2.0 * 0.8 * 0.5 * sides * math.sin(2 * math.pi / sides)
    corners, faces = tilted_prism(sides, 0.8, 25.0, -10.0)
    mesh = faceted_mesh(corners, faces)
    assert is_closed(mesh) and mesh.piece.max() + 1 == sides + 2
    # the mean height of a tilted plane over a regular base is that at its centre
    assert mesh.volume == pytest.approx(right, rel=1e-13)
    assert mesh.volume == pytest.approx(ConvexHull(corners).volume, rel=1e-12)
    normals = mesh.area_vectors / np.linalg.norm(mesh.area_vectors, axis=1, keepdims=True)
    tilts = np.degrees(np.arccos(np.abs(normals[:, 2])))
    assert np.allclose(tilts[mesh.piece == 1], 25.0) and np.allclose(tilts[mesh.piece == 0], 10.0)
    hollow = indented_prism(sides, 0.8, 0.6)
    assert is_closed(hollow)
    assert hollow.volume == pytest.approx(right * (1.0 - 0.6 / 3.0), rel=1e-13)
    with pytest.raises(ValueError, match="tilted ends of the prism meet"):
        tilted_prism(sides, 0.2, -40.0, 40.0)


@pytest.mark.parametrize("upper", [0.0, 0.4, 1.0])
def test_cones_and_cylinders(upper):
    mesh = frustum(1.0, upper, 1.7)
    assert is_closed(mesh)
    volume = math.pi * 1.7 / 3 * (1 + upper + upper**2)
    slant = math.hypot(1.7, 1.0 - upper)
    area = math.pi * (1 + upper**2 + (1 + upper) * slant)
    assert mesh.volume == pytest.approx(volume, rel=1e-13)
    # a polygon of 400 sides of the same area is longer by (pi / 400)^2 / 6
    assert mesh.area == pytest.approx(area, rel=2e-5)
    height = mesh.centroid[2] + 0.85
    exact = 1.7 * (1 + 2 * upper + 3 * upper**2) / (4 * (1 + upper + upper**2))
    assert height == pytest.approx(exact, rel=1e-12)


@pytest.mark.parametrize("length", [2.0, 3.5])
def test_capsules(length):
    mesh = capsule(1.0, length)
    assert is_closed(mesh)
    assert mesh.volume == pytest.approx(4 * math.pi / 3 + math.pi * (length - 2), rel=2e-6)
    assert mesh.area == pytest.approx(2 * math.pi * length, rel=1e-4)


@pytest.mark.parametrize("exponents", [(1.0, 1.0), (0.4, 0.4), (0.3, 1.0), (1.5, 1.5), (1.8, 0.5)])
def test_superellipsoids(exponents):
    axes = (1.0, 0.8, 0.6)
    mesh = superellipsoid(axes, *exponents)
    assert is_closed(mesh)
    # Volume by Beta functions; at tips and ridges (exponents above 1) bends have no radius, and
    # the error there falls with the size of triangles alone (1/100): its area times its height
    tolerance = 2e-5 if max(exponents) > 1.0 else 5e-7
    assert mesh.volume == pytest.approx(superellipsoid_volume(axes, *exponents), rel=tolerance)
    x, y, z = np.abs(mesh.corners / axes).T
    n, e = exponents
    inside = (x ** (2 / e) + y ** (2 / e)) ** (e / n) + z ** (2 / n)
    assert np.abs(inside - 1.0).max() < 0.01
    assert superellipsoid_volume((2, 3, 4), 1, 1) == pytest.approx(32 * math.pi, rel=1e-13)


def test_cells_of_a_sphere_at_64_across():
    """The claim of the module: cells right to 1e-4 where 64 lie across."""
    spacing, box = 2.0 / 64, (66, 66, 66)
    origin = np.array([33.1, 33.3, 33.2])
    mesh = sphere_mesh(np.zeros(3), 1.0)
    scale = math.cbrt(4 * math.pi / 3 / mesh.volume) / spacing
    cells = surface_cells(mesh.moved(np.zeros(3), scale), origin, box)
    fill, _ = ball_overlap(spacing * np.eye(3), origin, box)
    assert np.abs(cells.fill - fill).max() < 1e-4
    assert mesh.volume == pytest.approx(4 * math.pi / 3, rel=1e-7)
    assert mesh.area == pytest.approx(4 * math.pi, rel=1e-4)


def test_hull_faces_are_whole():
    grid = np.stack(np.meshgrid(*[np.linspace(0, 1, 4)] * 3), axis=-1).reshape(-1, 3)
    mesh = hull_mesh(grid)
    assert is_closed(mesh) and mesh.piece.max() + 1 == 6 and len(mesh.triangles) == 12
    with pytest.raises(ValueError, match="in one plane"):
        hull_mesh(grid * [1, 1, 0])


def test_stated_symmetries_are_those_of_the_surface():
    """What is believed later is looked at here: corners turned, and mirrored."""
    for spec in (
        {"kind": "cylinder", "length_to_diameter": 0.7},
        {"kind": "capsule", "length_to_diameter": 1.5},
        {"kind": "superellipsoid", "axes": [1, 1, 0.5], "exponents": [0.6, 1.0]},
    ):
        solid = build(spec)
        assert solid.symmetry == "axial"
        corners = solid.interfaces[0].mesh.corners
        flat = np.hypot(corners[:, 0], corners[:, 1])
        # reach along every azimuth and height alike, to the bulge of a polygon
        for part in (corners[:, 0], corners[:, 1], -corners[:, 0]):
            assert part.max() == pytest.approx(flat.max(), rel=2e-3)
        assert corners[:, 2].max() == pytest.approx(-corners[:, 2].min(), rel=1e-9)
