"""The rules of effort: lattices on which a shape lies alike, truncation, spacing of anchors."""

import math

import pytest

from scatterloom.campaign import effort


@pytest.mark.parametrize("ratio", [1.0, 2.0, 0.5, 3.0, 1.7, 1.921, 2.748, 0.34, 1.3])
def test_levels_lie_alike(ratio):
    """Half axes change by nearly whole cells from level to level.

    A random choice of lattices misses a whole cell by 0.25 on the average; with ten or so
    lattices to choose from the middle one, which counts most, can be had within 0.2.
    """
    proportions = (1.0, 1.0, 1.0 / ratio) if ratio >= 1 else (ratio, ratio, 1.0)
    low, middle, top = effort.aligned_levels(24, proportions)
    assert 24 <= top < 28
    for cells, limit in ((middle, 0.2), (low, 0.4)):
        for part in set(proportions):
            step = (top - cells) / 2 * part
            assert abs(step - round(step)) <= limit
    assert 0.44 <= low / top < middle / top <= 0.84


def test_levels_grow_with_what_is_asked():
    ball = (1.0, 1.0, 1.0)
    small = effort.levels(ball, 1.5, 1.0)
    assert effort.levels(ball, 1.5, 6.0)[-1] > small[-1]
    assert effort.levels(ball, 1.5, 1.0, f11_relative=0.002)[-1] > small[-1]
    needle = (3.0 ** (-1 / 3), 3.0 ** (-1 / 3), 3.0 ** (2 / 3))
    assert effort.levels(needle, 1.5, 1.0)[-1] > small[-1]
    # No accuracy asked buys fewer cells than the default does.
    assert effort.levels(ball, 1.5, 1.0, f11_relative=0.5) == small


def test_cells_resolve_the_wave_inside():
    """At least ten cells per wavelength inside the particle (common practice), at any size."""
    for x in (0.1, 1.0, 3.0, 6.0, 12.0, 25.0):
        for index in (1.1, 1.5, 2.0):
            finest = effort.levels((1.0, 1.0, 1.0), index, x)[-1]
            assert 2 * math.pi / (2.0 * x * index / finest) >= 10.0


def test_truncation_grows():
    ball, plate = (1.0, 1.0, 1.0), (1.26, 1.26, 0.63)
    for axes in (ball, plate):
        orders = [effort.n_max(axes, x) for x in (0.1, 1.0, 3.0, 10.0)]
        assert orders == sorted(orders) and orders[0] >= 2
        assert all(n > x for n, x in zip(orders, (0.1, 1, 3, 10), strict=True))
    assert effort.n_max(plate, 3.0) > effort.n_max(ball, 3.0)
    assert effort.n_max(ball, 3.0, f11_relative=0.002) > effort.n_max(ball, 3.0)


def test_anchors_are_denser_for_strong_refraction():
    steps = [effort.anchor_step(m, 3.0) for m in (1.05, 1.33, 1.5, 2.0, 2.5 + 0.5j)]
    assert steps == sorted(steps, reverse=True)
    assert steps[0] == 1.0
