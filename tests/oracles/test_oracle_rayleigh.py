"""The Rayleigh oracle against closed forms, the Mie series and brute-force averaging."""

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from oracles import rayleigh
from oracles.mie import sphere
from oracles.mueller import gauss_angles, mueller


def test_depolarization_factors_of_spheroids():
    # Bohren & Huffman 1983, eq. 5.33 (prolate) and 5.34 (oblate); from memory
    e = np.sqrt(1 - 1 / 4)
    prolate = (1 - e**2) / e**2 * (np.log((1 + e) / (1 - e)) / (2 * e) - 1)
    g = np.sqrt((1 - e**2) / e**2)
    oblate_equator = g / (2 * e**2) * (np.pi / 2 - np.arctan(g)) - g**2 / 2
    found = rayleigh.depolarization_factors([1, 1, 2])
    np.testing.assert_allclose(found, [(1 - prolate) / 2] * 2 + [prolate], rtol=1e-12)
    found = rayleigh.depolarization_factors([2, 2, 1])
    np.testing.assert_allclose(found, [oblate_equator] * 2 + [1 - 2 * oblate_equator], rtol=1e-12)
    assert rayleigh.depolarization_factors([3, 2, 1]).sum() == pytest.approx(1.0, rel=1e-12)


def test_sphere_is_the_limit_of_mie():
    # the next order is x^2 = 1e-6
    index, x = 1.6 + 0.2j, 1e-3
    exact, small = sphere(index, x), rayleigh.efficiencies([1, 1, 1], index, x)
    for name in ("extinction", "scattering", "absorption"):
        name += "_efficiency"
        assert small[name] == pytest.approx(getattr(exact, name), rel=1e-5, abs=0)
    angles = [0, 20, 90, 180]
    np.testing.assert_allclose(
        rayleigh.scattering_matrix([1, 1, 1], index, angles),
        exact.scattering_matrix(angles),
        atol=1e-5,
    )


def test_average_over_many_rotations():
    # 20000 quasi-uniform rotations; Monte Carlo error 1/sqrt(20000) times a spread below 1
    axes, index = [3.0, 2.0, 1.0], 2.0 + 0.5j
    alpha = np.diag(rayleigh.polarizabilities(axes, index))
    turn = Rotation.random(20000, random_state=5).as_matrix()
    tensor = turn @ alpha @ np.swapaxes(turn, 1, 2)
    for angle in (0.0, 65.0, 90.0, 180.0):
        c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
        # incidence along z, scattering plane xz; perpendicular = parallel x direction
        par_i, perp, par_s = np.array([1, 0, 0]), np.array([0, -1, 0]), np.array([c, 0, -s])
        s1, s2, s3, s4 = (
            np.einsum("i,nij,j->n", left, tensor, right)
            for left, right in ((perp, perp), (par_s, par_i), (par_s, perp), (perp, par_i))
        )
        mean = mueller(s1, s2, s3, s4).mean(axis=0)
        expected = rayleigh.scattering_matrix(axes, index, angle)
        scale = np.sum(np.abs(rayleigh.polarizabilities(axes, index)) ** 2) * 2 / 9
        np.testing.assert_allclose(mean / scale, expected, atol=0.02)


def test_normalization_and_identities():
    angles, weights = gauss_angles(8)
    matrix = rayleigh.scattering_matrix([2, 2, 1], 1.5, angles)
    assert 0.5 * weights @ matrix[:, 0, 0] == pytest.approx(1.0, rel=1e-13)
    forward, back = rayleigh.scattering_matrix([2, 2, 1], 1.5, [0, 180])
    assert forward[1, 1] == pytest.approx(forward[2, 2], rel=1e-13)
    assert back[1, 1] == pytest.approx(-back[2, 2], rel=1e-13)
    assert back[3, 3] == pytest.approx(back[0, 0] - 2 * back[1, 1], rel=1e-12)
