"""Overlap of the unit ball with bricks, against general-purpose quadrature and closed forms."""

import math

import numpy as np
import pytest
from scipy import integrate

from scatterloom.particle import overlap
from scatterloom.particle.overlap import disc_rectangle, octant_overlap

NODES = np.polynomial.legendre.leggauss(24)


def quad_disc_rectangle(radius2, u0, u1, v0, v1):
    def height(u):
        return max(0.0, min(v1, math.sqrt(max(radius2 - u * u, 0.0))) - v0)

    kinks = sorted(
        math.sqrt(radius2 - v * v)
        for v in (0.0, v0, v1)
        if radius2 >= v * v and u0 < math.sqrt(radius2 - v * v) < u1
    )
    return integrate.quad(height, u0, u1, points=kinks or None, epsabs=1e-13, epsrel=1e-12)[0]


@pytest.mark.parametrize(
    "rectangle",
    [
        (0.3, 0.5, 0.2, 0.9),  # arc crosses left and right sides
        (0.1, 0.9, 0.6, 0.7),  # top and bottom
        (0.6, 0.7, 0.6, 0.8),  # one corner inside
        (0.5, 0.72, 0.5, 0.72),  # one corner outside
        (0.0, 0.2, 0.95, 1.1),  # cap
        (0.0, 1.2, 0.0, 1.2),  # quarter disc
        (0.7, 0.8, 0.714, 0.8),  # sliver
    ],
)
def test_disc_rectangle(rectangle):
    expected = quad_disc_rectangle(1.0, *rectangle)
    assert disc_rectangle(1.0, *rectangle) == pytest.approx(expected, rel=1e-10, abs=0)
    # the reflection about the diagonal exchanges the sides
    u0, u1, v0, v1 = rectangle
    assert disc_rectangle(1.0, v0, v1, u0, u1) == pytest.approx(expected, rel=1e-10, abs=0)


def test_disc_rectangle_outside_and_inside():
    assert disc_rectangle(1.0, 0.8, 0.9, 0.7, 0.8) == 0.0
    assert disc_rectangle(1.0, 0.1, 0.3, 0.2, 0.6) == pytest.approx(0.08, rel=1e-15)
    assert disc_rectangle(0.25, 0.0, 2.0, 0.0, 2.0) == pytest.approx(math.pi / 16, rel=1e-15)


def test_segment_series_meets_the_closed_form():
    # half angle 0.05 is where the series takes over; both sides must agree
    for half in (0.0499999, 0.0500001):
        chord = 2 * math.sin(half)
        expected = 0.5 * (2 * half - math.sin(2 * half))
        assert overlap._segment(chord, 1.0) == pytest.approx(expected, rel=1e-11, abs=0)


@pytest.mark.parametrize(
    "brick",
    [
        (0.0, 0.25, 0.0, 0.25, 0.9, 1.1),
        (0.5, 0.6, 0.5, 0.6, 0.5, 0.6),
        (0.55, 0.6, 0.55, 0.6, 0.55, 0.6),
        (0.0, 0.1, 0.7, 0.8, 0.6, 0.7),
        (0.2, 0.5, 0.3, 0.4, 0.8, 0.95),
    ],
)
def test_ball_brick_against_quadrature(brick):
    x0, x1, y0, y1, z0, z1 = brick
    expected, _ = integrate.quad(
        lambda z: quad_disc_rectangle(max(0.0, 1 - z * z), x0, x1, y0, y1),
        z0,
        z1,
        points=[
            math.sqrt(1 - x * x - y * y)
            for x in (x0, x1)
            for y in (y0, y1)
            if 1 - x * x - y * y > 0 and z0 < math.sqrt(1 - x * x - y * y) < z1
        ]
        or None,
        epsabs=1e-13,
        epsrel=1e-11,
    )
    assert overlap.ball_brick(*brick, *NODES) == pytest.approx(expected, rel=1e-9, abs=0)
    # turning the brick changes the direction of integration, not the volume
    turned = overlap.ball_brick(z0, z1, x0, x1, y0, y1, *NODES)
    assert turned == pytest.approx(expected, rel=1e-9, abs=0)


def test_polar_cap_in_closed_form():
    # cap of height h: pi h^2 (3 - h) / 3, a quarter of it in the octant
    h = 0.1
    volume = overlap.ball_brick(0.0, 0.5, 0.0, 0.5, 1 - h, 1.2, *NODES)
    assert volume == pytest.approx(math.pi * h**2 * (3 - h) / 12, rel=1e-12, abs=0)


@pytest.mark.parametrize(
    "edges", [(1 / 8, 1 / 8, 1 / 8), (0.05, 0.11, 0.4), (1.0, 1.3, 2.0), (0.09, 0.09, 1.0)]
)
def test_octant_sums(edges):
    edges = np.array(edges)
    counts = tuple(int(np.ceil(1 / edge - 1e-9)) for edge in edges)
    fill, area = octant_overlap(edges, counts)
    brick = np.prod(edges)
    assert fill.sum() * brick == pytest.approx(math.pi / 6, rel=1e-12)
    # Surface vectors of the whole octant: each component is the quarter disc that
    # closes it, pi/4 in units of the brick's own face.
    quarter = math.pi / 4 * edges / brick
    np.testing.assert_allclose(area.sum(axis=(0, 1, 2)), quarter, rtol=1e-11)
    assert np.all(area >= 0.0)
    cut = (fill > 0) & (fill < 1)
    assert np.array_equal(np.any(area > 0, axis=-1), cut)


def test_surface_vector_against_surface_integral():
    # Cells the surface z = sqrt(1-x^2-y^2) crosses from side to side, without
    # touching top or bottom: the surface vector is the integral of (x/z, y/z, 1).
    edges = np.array([0.1, 0.15, 0.3])
    fill, area = octant_overlap(edges, (10, 7, 4))
    faces = np.prod(edges) / edges
    found = 0
    for i, j, k in np.argwhere((fill > 0) & (fill < 1)):
        x0, y0, z0 = np.array([i, j, k]) * edges
        x1, y1, z1 = np.array([i + 1, j + 1, k + 1]) * edges
        if x0**2 + y0**2 + z1**2 <= 1 or x1**2 + y1**2 + z0**2 >= 1:
            continue
        found += 1

        def slope(y, x, axis):
            return (x, y)[axis] / math.sqrt(1 - x * x - y * y)

        expected = [
            integrate.dblquad(slope, x0, x1, y0, y1, args=(axis,), epsrel=1e-11)[0]
            for axis in (0, 1)
        ] + [(x1 - x0) * (y1 - y0)]
        np.testing.assert_allclose(area[i, j, k] * faces, expected, rtol=1e-8)
    assert found >= 5


def test_octant_too_small_is_refused():
    with pytest.raises(ValueError, match="do not hold the unit ball"):
        octant_overlap(np.array([0.1, 0.1, 0.1]), (10, 10, 9))
