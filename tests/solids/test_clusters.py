"""Clusters: the fractal law, contacts, packing; necks and coatings against closed formulas."""

import math

import numpy as np
import pytest
from scipy.integrate import quad

from scatterloom.solids import growth
from scatterloom.solids.growth import (
    ballistic_cluster,
    fractal_cluster,
    packed_cluster,
    radius_of_gyration,
)
from scatterloom.solids.implicit import implicit_mesh
from scatterloom.solids.mesh import MEDIUM
from scatterloom.solids.registry import build
from scatterloom.solids.spheres import Necked, cluster_solid, neck_volume, spheres_mesh
from solid_kit import is_closed

PAIR = np.array([[0.0, 0.0, -1.0], [0.0, 0.0, 1.0]])
BALL = 4 * math.pi / 3


def gaps(centres):
    apart = np.linalg.norm(centres[:, None] - centres, axis=2)
    return apart[np.triu_indices(len(centres), 1)] - 2.0


def is_connected(centres) -> bool:
    near = np.linalg.norm(centres[:, None] - centres, axis=2) < 2.0 + 1e-7
    reached = near[0]
    for _ in centres:
        reached = near[reached].any(axis=0)
    return bool(reached.all())


@pytest.mark.parametrize("count,dimension,prefactor", [
    (3, 1.8, 1.3), (8, 1.8, 1.3), (50, 1.8, 1.3), (40, 2.5, 1.2), (32, 1.4, 1.6), (13, 2.2, 1.1),
])  # fmt: skip
def test_fractal_clusters_keep_their_law(count, dimension, prefactor):
    centres = fractal_cluster(count, dimension, prefactor, 3)
    law = prefactor * radius_of_gyration(centres) ** dimension
    assert law == pytest.approx(count, rel=1e-10)
    assert gaps(centres).min() > -1e-8 and is_connected(centres)
    assert np.abs(centres.mean(axis=0)).max() < 1e-12
    # one contact joins two clusters: never fewer than N - 1
    assert np.sum(gaps(centres) < 1e-7) >= count - 1


def test_parts_of_a_fractal_cluster_keep_the_law_too():
    """Clusters are joined in halves: the first half is a cluster of its own."""
    centres = fractal_cluster(32, 1.8, 1.3, 1)
    for part in (centres[:16], centres[:8], centres[16:]):
        assert 1.3 * radius_of_gyration(part) ** 1.8 == pytest.approx(len(part), rel=1e-10)


def test_laws_that_no_cluster_keeps_are_refused(monkeypatch):
    # 16 spheres within R_g = (16 / 3.5)^(1 / 1.8) fit, but already 3 would have to overlap
    with pytest.raises(ValueError, match=r"ask 3 touching spheres for a radius of gyration of"):
        fractal_cluster(16, 1.8, 3.5, 1)
    # longer than a straight chain
    with pytest.raises(ValueError, match=r"possible are 1\.155 to 1\.633"):
        fractal_cluster(16, 1.2, 0.4, 1)
    # denser than spheres can be
    monkeypatch.setattr(growth, "_BEGINNINGS", 1)
    with pytest.raises(ValueError, match="no cluster of 14 touching spheres with"):
        fractal_cluster(14, 2.9, 1.95, 1)


def test_ballistic_clusters_are_loose_and_touch():
    dimensions = []
    for seed in range(6):
        centres = ballistic_cluster(120, seed)
        assert gaps(centres).min() > -1e-8 and is_connected(centres)
        # each new sphere touches one sphere
        assert np.sum(gaps(centres) < 1e-7) == 119
        dimensions.append(math.log(120) / math.log(radius_of_gyration(centres)))
    # compact in the limit (D = 3): at 120 spheres well above the D of clusters of clusters
    assert np.mean(dimensions) > 2.2


def test_packed_clusters():
    centres = packed_cluster(60, 1)
    assert gaps(centres).min() > -1e-8
    # three spheres, then three contacts for each
    assert np.sum(gaps(centres) < 1e-7) >= 3 + 3 * 57
    # serial deposition packs to 0.5 to 0.6 in the middle (Bennett 1972, from memory)
    away = np.linalg.norm(centres, axis=1)
    within = np.sum(away < 2.9) * 1.0 / 2.9**3
    assert 0.35 < within < 0.75


def test_necks_have_the_volume_of_pappus_and_of_the_integral():
    for neck in (0.2, 0.5, 0.8):
        q = neck**2 / (2 * (1 - neck))
        ring, top = neck + q, q / (1 + q)
        outline, _ = quad(lambda s, a=ring, b=q: math.pi * (a - math.sqrt(b * b - s * s)) ** 2,
                          -top, top, epsabs=1e-13)  # fmt: skip
        caps = 2 * math.pi * top**2 * (3 - top) / 3
        assert neck_volume(neck) == pytest.approx(outline - caps, rel=1e-9)
        mesh = Necked(PAIR, neck).mesh()
        assert is_closed(mesh)
        assert mesh.volume == pytest.approx(2 * BALL + neck_volume(neck), rel=2e-5)
        middle = np.abs(mesh.corners[:, 2]) < 0.01
        radius = np.hypot(mesh.corners[middle, 0], mesh.corners[middle, 1])
        # triangles of 1/18 cut off the bend of radius q
        assert radius.min() == pytest.approx(neck, abs=(1 / 18) ** 2 / (8 * q))


def test_coatings_of_clusters():
    solid = cluster_solid(PAIR, coating=0.3)
    outer, inner = (face.mesh for face in solid.interfaces)
    cap = math.pi * 0.3**2 * (3 * 1.3 - 0.3) / 3
    assert is_closed(outer) and is_closed(inner)
    # the crease where the coats meet is as sharp as the grid allows
    assert outer.volume == pytest.approx(2 * (BALL * 1.3**3 - cap), rel=1e-4)
    assert inner.volume == pytest.approx(2 * BALL, rel=1e-6)
    assert solid.symmetry == "axial" and solid.materials == 2


def test_surfaces_of_functions():
    mesh = implicit_mesh(lambda p: np.linalg.norm(p, axis=1) - 1.0, -np.ones(3), np.ones(3), 40)
    assert is_closed(mesh)
    assert mesh.volume == pytest.approx(BALL, rel=1e-6)
    assert mesh.area == pytest.approx(4 * math.pi, rel=1e-3)

    def ring(p):  # a torus: a hole through the surface
        return np.hypot(np.hypot(p[:, 0], p[:, 1]) - 1.0, p[:, 2]) - 0.4

    reach = np.array([1.4, 1.4, 0.4])
    torus = implicit_mesh(ring, -reach, reach, 60)
    assert is_closed(torus)
    assert torus.volume == pytest.approx(2 * math.pi**2 * 0.16, rel=1e-5)


def test_spheres_apart_touching_and_overlapping():
    mesh = spheres_mesh(PAIR, np.ones(2))
    assert is_closed(mesh) and mesh.piece.max() == 1
    assert mesh.volume == pytest.approx(2 * BALL, rel=1e-6)
    with pytest.raises(ValueError, match=r"spheres 1 and 2 overlap by 0\.1"):
        spheres_mesh(PAIR * 0.95, np.ones(2))


def test_fillings():
    host = {"kind": "spheroid", "equatorial_to_polar": 1.3}
    solid = build({"kind": "filled", "host": host, "spheres": [
        {"material": 1, "centre": [0.35, 0.0, 0.0], "radius": 0.4},
        {"material": MEDIUM, "count": 8, "volume_fraction": 0.04, "seed": 2},
    ]})  # fmt: skip
    assert solid.volume == pytest.approx(BALL * 0.96, rel=1e-6)
    centres = np.array([face.mesh.centroid for face in solid.interfaces[1:]])
    radii = np.array([0.4, *[(0.04 / 8) ** (1 / 3)] * 8])
    apart = np.linalg.norm(centres[:, None] - centres, axis=2) + 9 * np.eye(9)
    assert np.all(apart > radii[:, None] + radii)
    # within the spheroid: a sphere of radius r is if its centre is r inside, roughly
    a, c = 1.3 ** (1 / 3), 1.3 ** (-2 / 3)
    for centre, radius in zip(centres, radii, strict=True):
        unit = np.random.default_rng(0).normal(size=(500, 3))
        points = centre + radius * unit / np.linalg.norm(unit, axis=1, keepdims=True)
        assert np.all((points / [a, a, c]) ** 2 @ np.ones(3) < 1.0)


@pytest.mark.parametrize("spheres,message", [
    ({"centre": [0.6, 0, 0], "radius": 0.5}, "touches the surface, which is "),
    ({"centre": [1.6, 0, 0], "radius": 0.5}, "has its centre outside"),
    ({"count": 9, "volume_fraction": 0.6, "seed": 1}, "no room was found for 9 spheres"),
])  # fmt: skip
def test_fillings_that_do_not_fit(spheres, message):
    with pytest.raises(ValueError, match=message):
        build(
            {"kind": "filled", "host": {"kind": "sphere"}, "spheres": [{"material": 1, **spheres}]}
        )


def test_layers():
    cube = {"kind": "cuboid", "edges": [1.0, 1.0, 1.0]}
    edge = BALL ** (1 / 3)
    even = build({"kind": "layered", "host": cube, "thicknesses": [0.1, 0.2]})
    volumes = [face.mesh.volume for face in even.interfaces]
    expected = [edge**3, (edge - 0.2) ** 3, (edge - 0.6) ** 3]
    assert volumes == pytest.approx(expected, rel=1e-12)
    alike = build({"kind": "layered", "host": cube, "scales": [0.8, 0.5]})
    volumes = [face.mesh.volume for face in alike.interfaces]
    assert volumes == pytest.approx([BALL, BALL * 0.512, BALL * 0.125], rel=1e-12)
    rod = build({"kind": "layered", "host": {"kind": "cylinder", "length_to_diameter": 1.0},
                 "thicknesses": [0.2]})  # fmt: skip
    radius = (2.0 / 3.0) ** (1 / 3)
    inner = math.pi * (radius - 0.2) ** 2 * (2 * radius - 0.4)
    assert rod.interfaces[1].mesh.volume == pytest.approx(inner, rel=3e-5)
    with pytest.raises(ValueError, match="do not fit into the body: the largest sphere inside"):
        build({"kind": "layered", "host": cube, "thicknesses": [0.5, 0.5]})
    dented = {"kind": "shaped_prism", "sides": 6, "height_to_width": 1.0, "indentation": 0.5}
    with pytest.raises(ValueError, match="only a convex body"):
        build({"kind": "layered", "host": dented, "thicknesses": [0.1]})
