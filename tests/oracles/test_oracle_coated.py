"""Coated-sphere series against published numbers and the limits it must have."""

import numpy as np
import pytest

from oracles import mie
from oracles.coated import coated_polarizability, coated_sphere


def test_bohren_and_huffman_appendix_b():
    # The example printed in Bohren & Huffman 1983, App. B (values from memory): core
    # 1.59+0.66i of radius 0.171 um, coating 1.409+0.1747i of 6.265 um, wavelength 3 um.
    unit = 2 * np.pi / 3.0
    ball = coated_sphere(1.59 + 0.66j, 1.409 + 0.1747j, 0.171 * unit, 6.265 * unit)
    assert ball.extinction_efficiency == pytest.approx(2.32803, rel=3e-6)
    assert ball.scattering_efficiency == pytest.approx(1.14341, rel=3e-6)
    # their backscattering efficiency is per geometric cross section, without the 4 pi
    assert ball.backscattering_efficiency == pytest.approx(0.0285099, rel=3e-6)


@pytest.mark.parametrize(
    ("arguments", "extinction", "scattering", "asymmetry"),
    [
        # from memory; reproduced by this series
        ((1.5, 1.33, 1.0, 2.0), 0.857041, 0.857041, 0.655511),
        ((1.5 + 0.01j, 1.33, 2.0, 5.0), 3.543070, 3.526702, 0.827773),
    ],
)
def test_known_efficiencies(arguments, extinction, scattering, asymmetry):
    ball = coated_sphere(*arguments)
    assert ball.extinction_efficiency == pytest.approx(extinction, abs=6e-7)
    assert ball.scattering_efficiency == pytest.approx(scattering, abs=6e-7)
    assert ball.asymmetry_parameter == pytest.approx(asymmetry, abs=6e-7)


@pytest.mark.parametrize("x", [0.5, 3.0, 12.0])
def test_a_coating_that_is_none(x):
    index = 1.5 + 0.1j
    plain = mie.sphere(index, x)
    angles = np.arange(0.0, 181.0, 15.0)
    for ball in (
        coated_sphere(index, index, 0.6 * x, x),  # both of one material
        coated_sphere(index, 1.0, x, 1.7 * x),  # a shell of the medium
        coated_sphere(1.3, index, 1e-4 * x, x),  # hardly a core
    ):
        scale = (ball.size_parameter / x) ** 2
        assert scale * ball.extinction_efficiency == pytest.approx(
            plain.extinction_efficiency, rel=1e-9
        )
        np.testing.assert_allclose(
            ball.scattering_matrix(angles), plain.scattering_matrix(angles), atol=1e-8
        )


def test_small_coated_spheres_have_the_static_polarizability():
    x = 0.01
    ball = coated_sphere(1.8 + 0.3j, 1.4, 0.7 * x, x)
    expected = -2j / 9 * x**3 * coated_polarizability(1.8 + 0.3j, 1.4, 0.7)
    assert ball.a[0] == pytest.approx(expected, rel=1e-4)  # next order x^2
