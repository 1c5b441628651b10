"""Filtered Green tensor and its octant spectrum, against integrals and numpy's transform."""

import itertools

import numpy as np
import pytest
from scipy import integrate
from scipy.special import spherical_jn

from oracles import dense
from scatterloom.dipole.kernel import lag_components, octant_spectrum, radial_parts

COMPONENTS = ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))


def fourier_parts(r, kd):
    """iso and rad from g(R) = (2/pi) PV int_0^(pi/kd) q^2 j0(qR)/(q^2-1) dq + i sin R/R.

    The definition of the filter (Piller & Martin 1998): the spectrum of exp(iR)/R cut at
    pi/kd. Derivatives are taken under the integral.
    """

    def integral(kernel):
        value, _ = integrate.quad(
            lambda q: q**2 * kernel(q) / (q + 1.0),
            0.0,
            np.pi / kd,
            weight="cauchy",
            wvar=1.0,
            epsabs=0.0,
            epsrel=1e-10,
            limit=400,
        )
        return 2.0 / np.pi * value

    def curvature(z):
        return -spherical_jn(0, z) + 2.0 * spherical_jn(1, z) / z if z else -1.0 / 3.0

    g = integral(lambda q: spherical_jn(0, q * r)) + 1j * spherical_jn(0, r)
    g1 = integral(lambda q: -q * spherical_jn(1, q * r)) - 1j * spherical_jn(1, r)
    g2 = integral(lambda q: q**2 * curvature(q * r)) + 1j * curvature(r)
    return g + g1 / r, g2 - g1 / r


@pytest.mark.parametrize("kd", [0.15, 0.6, 2.0])
def test_radial_parts_are_the_cut_fourier_integral(kd):
    r = kd * np.array([1.0, np.sqrt(2.0), 3.0, 7.5])
    iso, rad = radial_parts(r, kd)
    for i, distance in enumerate(r):
        expected_iso, expected_rad = fourier_parts(distance, kd)
        # Adaptive quadrature to 1e-10 of integrals that add up to 1/kd^3.
        assert iso[i] == pytest.approx(expected_iso, rel=1e-8, abs=1e-9 / kd**3)
        assert rad[i] == pytest.approx(expected_rad, rel=1e-8, abs=1e-9 / kd**3)


def test_lag_components_are_the_dense_interaction():
    kd, lags = 0.45, (3, 4, 2)
    tensor = np.stack(list(lag_components(lags, kd)))
    assert not tensor[:, 0, 0, 0].any()
    for lag in itertools.islice(itertools.product(*map(range, lags)), 1, None):
        expected = dense.filtered_green(kd * np.array([lag], float), 1.0, kd)[0]
        found = [tensor[(c, *lag)] for c in range(6)]
        scale = np.abs(expected).max()
        np.testing.assert_allclose(
            found, [expected[pair] for pair in COMPONENTS], atol=1e-12 * scale
        )


def full_spectrum(box, half, kd):
    """numpy.fft of the interaction at every signed lag of the padded grid, over its size."""
    size = [2 * h for h in half]
    kernel = np.zeros((3, 3, *size), complex)
    ranges = [range(-(n - 1), n) for n in box]
    lags = np.array([lag for lag in itertools.product(*ranges) if any(lag)])
    values = dense.filtered_green(kd * lags.astype(float), 1.0, kd)
    for lag, value in zip(lags, values, strict=True):
        kernel[(slice(None), slice(None), *(lag % size))] = value
    return np.fft.fftn(kernel, axes=(2, 3, 4)) / np.prod(size)


@pytest.mark.parametrize("dtype", [np.complex128, np.complex64])
@pytest.mark.parametrize(
    ("box", "half"),
    [
        ((3, 5, 4), (3, 5, 4)),
        ((2, 3, 6), (4, 3, 9)),
        ((1, 2, 3), (1, 5, 3)),
        ((4, 4, 4), (4, 4, 4)),
    ],
)
def test_octant_spectrum_is_the_full_transform(box, half, dtype):
    kd = 0.5
    octant = octant_spectrum(box, half, kd, dtype)
    assert octant.dtype == dtype
    assert octant.shape == (half[0] + 1, 6, half[1] + 1, half[2] + 1)
    full = full_spectrum(box, half, kd)
    # Every index of the padded grid, the mirrored ones and Nyquist included.
    scale = np.abs(full).max()
    tolerance = (1e-13 if dtype is np.complex128 else 2e-7) * scale
    index = [np.arange(2 * h) for h in half]
    folded = [np.where(i <= h, i, 2 * h - i) for i, h in zip(index, half, strict=True)]
    mirrored = [np.where(i <= h, 1, -1) for i, h in zip(index, half, strict=True)]
    for c, (row, column) in enumerate(COMPONENTS):
        sign = np.ones([2 * h for h in half])
        if row != column:
            for axis in (row, column):
                shape = [1, 1, 1]
                shape[axis] = -1
                sign = sign * mirrored[axis].reshape(shape)
        unfolded = octant[np.ix_(folded[0], [c], folded[1], folded[2])][:, 0] * sign
        np.testing.assert_allclose(unfolded, full[row, column], atol=tolerance)
        if row != column:
            for axis in (row, column):
                at = [slice(None)] * 3
                for edge in (0, half[axis]):
                    at[axis] = edge
                    assert not octant[:, c][tuple(at)].any()


@pytest.mark.parametrize("kd", [0.0, -0.1, np.pi, 4.0, np.nan])
def test_spacing_beyond_the_filter_is_refused(kd):
    with pytest.raises(ValueError, match="must be below pi"):
        octant_spectrum((2, 2, 2), (2, 2, 2), kd)
