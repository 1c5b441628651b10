"""Shapes: volumes, symmetries and messages."""

import math

import pytest

from scatterloom.particle.shapes import from_spec


@pytest.mark.parametrize(
    ("spec", "symmetry", "ratios"),
    [
        ({"kind": "sphere"}, "sphere", (1, 1)),
        ({"kind": "spheroid", "equatorial_to_polar": 2.0}, "axial", (1, 2)),
        ({"kind": "spheroid", "equatorial_to_polar": 0.5}, "axial", (1, 0.5)),
        ({"kind": "spheroid", "equatorial_to_polar": 1.0}, "sphere", (1, 1)),
        ({"kind": "ellipsoid", "axes": [3, 2, 1]}, "mirrors", (1.5, 3)),
        ({"kind": "ellipsoid", "axes": [2, 2, 1]}, "axial", (1, 2)),
        ({"kind": "ellipsoid", "axes": [2, 1, 1]}, "mirrors", (2, 2)),
        ({"kind": "ellipsoid", "axes": [0.7, 0.7, 0.7]}, "sphere", (1, 1)),
    ],
)
def test_shape(spec, symmetry, ratios):
    shape = from_spec(spec)
    a, b, c = shape.half_axes
    assert shape.symmetry == symmetry
    assert (a / b, a / c) == pytest.approx(ratios, rel=1e-14)
    # product of half axes 1: volume that of the unit sphere
    assert 4 * math.pi / 3 * a * b * c == pytest.approx(shape.volume, rel=1e-14)
    assert shape.circumscribed_radius == max(a, b, c)


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        ({"kind": "blob"}, "known kinds are sphere, spheroid, ellipsoid"),
        ({}, "unknown shape kind None"),
        ({"kind": "sphere", "axes": [1, 1, 1]}, "takes no further key, found \\['axes'\\]"),
        ({"kind": "spheroid"}, "takes equatorial_to_polar, found none"),
        ({"kind": "spheroid", "equatorial_to_polar": 0.0}, "positive and finite, found 0.0"),
        ({"kind": "spheroid", "equatorial_to_polar": math.inf}, "positive and finite"),
        ({"kind": "ellipsoid", "axes": [1, 2]}, "three lengths, found 2"),
        ({"kind": "ellipsoid", "axes": [1, 2, -3]}, "positive and finite, found -3"),
    ],
)
def test_bad_spec_names_the_fault(spec, message):
    with pytest.raises(ValueError, match=message):
        from_spec(spec)
