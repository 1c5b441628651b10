"""Convex polyhedra: closed forms of their volumes and faces, and what is refused."""

import math

import numpy as np
import pytest

from scatterloom.particle.polyhedron import convex_polyhedron, cuboid, prism

UNIT = 4 * math.pi / 3


def test_cuboid_in_closed_form():
    body = cuboid([3.0, 2.0, 1.0])
    scale = math.cbrt(UNIT / 6.0)
    assert body.volume == pytest.approx(UNIT, rel=1e-14)
    np.testing.assert_allclose(
        np.ptp(body.corners, axis=0), scale * np.array([3, 2, 1]), rtol=1e-14
    )
    areas = sorted(np.linalg.norm(body.area_vectors, axis=1) / scale**2)
    np.testing.assert_allclose(areas, [2, 2, 3, 3, 6, 6], rtol=1e-13)


@pytest.mark.parametrize("sides", [3, 4, 5, 6, 12])
@pytest.mark.parametrize("ratio", [0.2, 1.0, 4.0])
def test_prism_in_closed_form(sides, ratio):
    body = prism(sides, ratio)
    radius = np.linalg.norm(body.corners[:, :2], axis=1)
    height = np.ptp(body.corners[:, 2])
    np.testing.assert_allclose(radius, radius[0], rtol=1e-14)
    assert height / (2 * radius[0]) == pytest.approx(ratio, rel=1e-14)
    base = sides / 2 * radius[0] ** 2 * math.sin(2 * math.pi / sides)
    assert base * height == pytest.approx(UNIT, rel=1e-13)
    assert body.volume == pytest.approx(UNIT, rel=1e-13)
    areas = np.linalg.norm(body.area_vectors, axis=1)
    np.testing.assert_allclose(areas[:2], base, rtol=1e-13)
    edge = 2 * radius[0] * math.sin(math.pi / sides)
    np.testing.assert_allclose(areas[2:], edge * height, rtol=1e-13)
    normals, distances = body.planes
    # faces of a regular prism touch an inscribed cylinder
    np.testing.assert_allclose(distances[2:], radius[0] * math.cos(math.pi / sides), rtol=1e-13)
    np.testing.assert_allclose(normals.sum(axis=0), 0.0, atol=1e-14)


TETRAHEDRON = (
    np.array([[1.0, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]]),
    [(0, 1, 2), (0, 2, 3), (0, 3, 1), (1, 3, 2)],
)


def test_any_polyhedron():
    body = convex_polyhedron(*TETRAHEDRON)
    # volume edge^3 / (6 sqrt 2)
    edge = np.linalg.norm(body.corners[0] - body.corners[1])
    assert edge**3 / (6 * math.sqrt(2)) == pytest.approx(UNIT, rel=1e-13)


@pytest.mark.parametrize(
    ("corners", "faces", "message"),
    [
        (TETRAHEDRON[0], [tuple(reversed(f)) for f in TETRAHEDRON[1]], "should be positive"),
        (TETRAHEDRON[0] + 3.0, TETRAHEDRON[1], "does not hold the origin"),
        (TETRAHEDRON[0], TETRAHEDRON[1][:3], "do not close"),
        (
            np.array([[1.0, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1.3]]),
            [(0, 1, 2, 3), (0, 3, 1), (1, 3, 2), (0, 2, 3)],
            "one plane",
        ),
    ],
)
def test_bad_polyhedra_are_refused(corners, faces, message):
    with pytest.raises(ValueError, match=message):
        convex_polyhedron(corners, faces)
