"""Rules of averages against the integrals that they must get right."""

import numpy as np
import pytest
from scipy.special import eval_legendre

from scatterloom.orientation.rules import Reach, reach, rule
from transition_kit import exact_sphere, exact_spheroid, rotated


@pytest.mark.parametrize("symmetry", ["axial", "mirrors", "none"])
@pytest.mark.parametrize("degree", [2, 3, 8, 17, 24])
def test_polar_angles_average_polynomials(symmetry, degree):
    at = rule(symmetry, Reach(degree, degree))
    assert at.weight.sum() == pytest.approx(1.0, rel=1e-13)
    assert np.all(at.weight > 0)
    assert at.mirrored == (symmetry != "none")
    # The mean of every Legendre polynomial but the constant one vanishes; those of odd degree
    # need not be averaged where there is an equatorial mirror plane.
    for n in range(1 if symmetry == "none" else 2, degree + 1, 1 if symmetry == "none" else 2):
        assert abs(at.weight @ eval_legendre(n, np.cos(at.beta))) < 1e-13, n
    # One more pair of nodes than needed at most.
    assert at.beta.size <= degree / (2 if symmetry == "none" else 4) + 3


def test_turns_by_symmetry():
    limits = Reach(20, 5)
    assert rule("none", limits).turn.tolist() == list(range(-5, 6))
    mirrors = rule("mirrors", limits)
    assert mirrors.turn.tolist() == [0, 2, 4]
    assert mirrors.turn_weight.tolist() == [1.0, 2.0, 2.0]
    assert rule("axial", limits).turn.tolist() == [0]


def test_one_direction_is_enough_for_a_sphere():
    at = rule("sphere", Reach(20, 10))
    assert at.weight.tolist() == [1.0]
    assert at.mirrored


def test_unknown_symmetry_is_refused():
    with pytest.raises(ValueError, match="unknown symmetry 'cube'"):
        rule("cube", Reach(2, 2))


def test_the_reach_of_exact_matrices():
    # All waves up to degree 5, scattered and incident, in both amplitudes.
    ball = exact_sphere(1.5 + 0.01j, 2.0, 5)
    assert reach(ball.matrix[None], ball.labels) == Reach(20, 0)
    spheroid = exact_spheroid(2.0, 1.5 + 0.01j, 1.5, 5)
    assert reach(spheroid.matrix[None], spheroid.labels).turn == 0
    # A rotation by an angle of no symmetry connects all orders.
    turned = rotated(spheroid, 0.7, 1.1, -0.4)
    assert reach(turned.matrix[None], turned.labels) == Reach(20, 10)
    assert reach(turned.matrix[None], turned.labels, 1e-6).turn < 10


def test_rules_in_parts_are_the_same_rule():
    at = rule("none", Reach(12, 6))
    for count in (1, 3, 1000):
        parts = at.batches(count)
        assert len(parts) == min(count, at.beta.size)
        for name in ("beta", "weight"):
            joined = np.concatenate([getattr(part, name) for part in parts])
            np.testing.assert_array_equal(joined, getattr(at, name))
