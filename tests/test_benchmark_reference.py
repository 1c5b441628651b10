"""The benchmarks' hand-written reference must itself be right, or their ratios mean nothing."""

import sys
from importlib import import_module
from pathlib import Path

import numpy as np
import pytest

from oracles.axial import random_orientation
from oracles.mie import sphere
from oracles.spheroid import spheroid

# The benchmarks are no part of the package.
sys.path.append(str(Path(__file__).parents[1] / "scripts"))
reference = import_module("benchmarks.reference")
averages = import_module("benchmarks.random_average")
output = import_module("benchmarks.output")
timing = import_module("benchmarks.timing")

Z, X = np.array([0.0, 0.0, 1.0]), np.array([1.0, 0.0, 0.0])


def test_product_equals_the_direct_sum():
    random = np.random.default_rng(3)
    cell = np.argwhere(random.random((4, 3, 5)) < 0.6)
    cell -= cell.min(axis=0)
    particle = reference.PointDipoles(cell, kd=0.7)
    dipoles = random.standard_normal((3, len(cell))) + 1j * random.standard_normal((3, len(cell)))
    position = particle.positions()
    expected = np.zeros_like(dipoles)
    for i in range(len(cell)):
        for j in range(len(cell)):
            if i == j:
                continue
            offset = position[i] - position[j]
            r = np.linalg.norm(offset)
            n = offset / r
            p = dipoles[:, j]
            across = p - n * (n @ p)
            # Jackson 1999, eq. 9.18: radiation and near field of a dipole.
            field = np.exp(1j * r) * (across / r + (3 * n * (n @ p) - p) * (1 / r**3 - 1j / r**2))
            expected[:, i] += field
    # Rounding of transforms of a few hundred points.
    np.testing.assert_allclose(particle.interaction(dipoles), expected, atol=1e-12)


def test_extinction_of_a_sphere():
    index, x = 1.33 + 0.01j, 1.0
    cell, spacing = reference.staircase(np.ones(3), 16)
    particle = reference.PointDipoles(cell, x * spacing)
    dipoles = particle.solve(index, Z, X)
    found = averages.extinction_efficiency(dipoles, particle, Z, X, x)
    # A staircase of 16 cells across is good to about one percent for so soft a particle.
    assert found == pytest.approx(sphere(index, x).extinction_efficiency, rel=0.015)
    assert particle.products >= 4


def test_average_over_orientation_of_a_spheroid():
    index, x = 1.33 + 0.01j, 0.8
    exact = random_orientation(spheroid(2.0, index, x))
    axes = np.array([2.0 ** (1 / 3)] * 2 + [2.0 ** (-2 / 3)])
    cell, spacing = reference.staircase(axes, 12)
    particle = reference.PointDipoles(cell, x * spacing)
    angles = np.array([30.0, 90.0, 150.0])
    directions, weights = averages.folded_directions(5)
    matrix, extinction = np.zeros((3, 4, 4)), 0.0
    for direction, weight in zip(directions, weights, strict=True):
        pair = []
        for e in averages.transverse(direction):
            pair.append(particle.solve(index, direction, e))
            extinction += (
                0.5 * weight * averages.extinction_efficiency(pair[-1], particle, direction, e, x)
            )
        matrix += weight * averages.mueller_of_incidence(
            particle, tuple(pair), direction, angles, 8
        )
    assert extinction == pytest.approx(exact.extinction_efficiency, rel=0.03)
    found = matrix / matrix[:, :1, :1]
    expected = exact.scattering_matrix(angles)
    expected = expected / expected[:, :1, :1]
    # Signs and positions of all elements; 0.02 is the error of a staircase this coarse.
    for i, j in ((1, 1), (2, 2), (3, 3), (0, 1), (2, 3)):
        np.testing.assert_allclose(found[:, i, j], expected[:, i, j], atol=0.02)
    assert np.abs(expected[:, 0, 1]).max() > 0.5


def test_folded_directions_average_even_polynomials():
    point, weight = averages.folded_directions(15)
    assert len(point) == 10
    x, y, z = point.T
    assert np.all(x >= y - 1e-12)
    assert weight.sum() == pytest.approx(1.0, rel=1e-14)
    # Means over the sphere: <z^2> = 1/3, <z^4> = 1/5, <z^14> = 1/15.
    for power, mean in ((2, 1 / 3), (4, 1 / 5), (14, 1 / 15)):
        assert weight @ z**power == pytest.approx(mean, rel=1e-12)
    # <x^2 y^2> = 1/15 and symmetric in x and y.
    assert weight @ (x**2 * y**2) == pytest.approx(1 / 15, rel=1e-12)


def test_turns_are_counted_and_ratios_paired():
    calls = []
    seconds = timing.in_turns(
        {"a": lambda: calls.append("a"), "b": lambda: calls.append("b")}, rounds=3, warm_up=1
    )
    assert len(calls) == 8 and {name: len(s) for name, s in seconds.items()} == {"a": 3, "b": 3}
    assert calls[:2] != calls[2:4]
    assert timing.median_ratio([2.0, 30.0, 8.0], [1.0, 10.0, 2.0]) == 3.0


def test_page_shows_every_row_and_note():
    result = output.Result([{"cells": 16, "ratio": 2.34567}, {"cells": 24, "ratio": 3.0}], ["why"])
    machine = {
        "date": "2000-01-01",
        "processor": "p",
        "cores": 2,
        "threads": 1,
        "load_average": 0.0,
        "environment": {},
        "linear_algebra": [{"internal_api": "openblas", "version": "1"}],
        "versions": {"python": "3"},
    }
    text = "\n".join(output.page("demo", "what it is", machine, result, picture=False))
    assert "| 16 | 2.35 |" in text and "| 24 | 3 |" in text and "- why" in text
    assert "settings in force: none" in text and ".png" not in text
