"""The two-sphere oracle: single spheres, energy, reciprocity, far apart, small sizes."""

import numpy as np
import pytest

from oracles import mie, pair


def test_each_sphere_is_that_of_the_series():
    known = mie.sphere(1.5 + 0.1j, 0.7)
    for n in (1, 2, 3):
        magnetic, electric = pair.sphere_coefficients(1.5 + 0.1j, 0.7, n)
        assert magnetic == pytest.approx(-known.b[n - 1], rel=1e-9)
        assert electric == pytest.approx(-known.a[n - 1], rel=1e-9)


def test_waves_shifted_there_and_back_are_themselves():
    there = pair.translation(1, -0.4, 12, 5, 0.7, False)
    back = pair.translation(1, 0.4, 5, 12, 0.7, False)
    np.testing.assert_allclose(back @ there, np.eye(10), atol=1e-7)


def test_energy_and_reciprocity():
    blocks = pair.pair(1.5, 0.7, 7, 10)
    extinction, scattering = pair.efficiencies(blocks, 0.7)
    assert extinction == pytest.approx(scattering, rel=1e-9)
    extinction, scattering = pair.efficiencies(pair.pair(1.5 + 0.2j, 0.7, 7, 10), 0.7)
    assert extinction > 1.5 * scattering
    # waves of the highest degree about the contact feel the cut at degree 10 about the spheres
    np.testing.assert_allclose(blocks[0], blocks[0].T, atol=2e-8)


def test_small_touching_spheres():
    """Static limit of two spheres in contact: between that of apart spheres and conductors.

    For touching dielectric spheres dipoles alone give, with c = (e - 1)/(e + 2), the
    polarizabilities per sphere c / (1 - c / 4) along and c / (1 + c / 8) across (dipole at distance
    2 a); higher multipoles add to the first and are below 10 % at e = 2.25.
    """
    x, index = 0.05, 1.5
    c = (index**2 - 1) / (index**2 + 2)
    blocks = pair.pair(index, x, 2, 8)
    electric = [pair.labels(m, 2).index((pair.ELECTRIC, 1)) for m in (0, 1)]
    along, across = (abs(blocks[m][e, e]) for m, e in zip((0, 1), electric, strict=True))
    one = abs(pair.sphere_coefficients(index, x, 1)[pair.ELECTRIC])
    assert along / (2 * one) == pytest.approx(1 / (1 - c / 4), rel=0.1)
    assert along / (2 * one) > 1 / (1 - c / 4)
    assert across / (2 * one) == pytest.approx(1 / (1 + c / 8), rel=0.02)
