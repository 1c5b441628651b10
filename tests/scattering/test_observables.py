"""Orientation averages of exact transition matrices."""

import numpy as np
import pytest

from oracles import axial, mie
from scatterloom.scattering.expansion import synthesize
from scatterloom.scattering.observables import observe
from transition_kit import exact_axial, exact_sphere, exact_spheroid

ANGLES = np.array([0.0, 3.0, 45.0, 90.0, 135.0, 177.0, 180.0])


def compare(found, exact, extinction, scattering, asymmetry, tolerance):
    assert found.extinction_efficiency == pytest.approx(extinction, rel=tolerance)
    assert found.scattering_efficiency == pytest.approx(scattering, rel=tolerance)
    # an independent path to the same number: the integral of F11
    assert found.integrated_scattering_efficiency == pytest.approx(scattering, rel=tolerance)
    assert found.asymmetry_parameter == pytest.approx(asymmetry, rel=tolerance, abs=tolerance)
    assert found.expansion[0, 0, 0] == pytest.approx(1.0, rel=1e-13)
    matrix = synthesize(found.expansion, ANGLES)
    np.testing.assert_allclose(matrix, exact, atol=tolerance * exact[:, 0, 0].max())


@pytest.mark.parametrize(("index", "x"), [(1.5 + 0.01j, 3.0), (1.33, 0.1), (1.75 + 0.44j, 1.0)])
def test_sphere(index, x):
    ball = mie.sphere(index, x, n_max=14)
    found = observe(exact_sphere(index, x, 14), "sphere", x)
    exact = ball.scattering_matrix(ANGLES)
    compare(
        found,
        exact,
        ball.extinction_efficiency,
        ball.scattering_efficiency,
        ball.asymmetry_parameter,
        1e-11,
    )
    # degree of the series: twice that of the waves
    assert found.expansion.shape == (29, 4, 4)


@pytest.mark.parametrize("ratio", [2.0, 0.5])
def test_spheroid(ratio):
    index, x = 1.5 + 0.01j, 1.5
    average = axial.random_orientation(exact_axial(ratio, index, x))
    found = observe(exact_spheroid(ratio, index, x), "axial", x)
    exact = average.scattering_matrix(ANGLES)
    # the oracle leaves out elements of T below 1e-10
    compare(
        found,
        exact,
        average.extinction_efficiency,
        average.scattering_efficiency,
        average.asymmetry_parameter,
        1e-8,
    )
