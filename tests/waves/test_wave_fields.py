"""Regular vector spherical waves: against scipy, Maxwell's equations and mirrors."""

import numpy as np
import pytest
from scipy.special import spherical_jn

from oracles import waves
from scatterloom.waves.basis import ELECTRIC, MAGNETIC, complex_from_real, wave_basis
from scatterloom.waves.fields import wave_fields


def points(count=40, reach=6.0, seed=1):
    rng = np.random.default_rng(seed)
    return rng.uniform(-reach, reach, (count, 3))


@pytest.mark.parametrize("n_max", [1, 2, 5, 9])
def test_there_are_twice_n_max_times_n_max_plus_two(n_max):
    basis = wave_basis(n_max)
    assert len(basis) == 2 * n_max * (n_max + 2)
    labels = set(zip(basis.kind, basis.degree, basis.order, basis.sine, strict=True))
    assert len(labels) == len(basis)
    for n in range(1, n_max + 1):
        for kind in (MAGNETIC, ELECTRIC):
            assert np.sum((basis.degree == n) & (basis.kind == kind)) == 2 * n + 1
    # a longer basis begins with the shorter one: starts of another truncation rely on it
    longer = wave_basis(n_max + 1)
    np.testing.assert_array_equal(longer.degree[: len(basis)], basis.degree)
    np.testing.assert_array_equal(longer.kind[: len(basis)], basis.kind)
    np.testing.assert_array_equal(longer.order[: len(basis)], basis.order)
    np.testing.assert_array_equal(longer.sine[: len(basis)], basis.sine)


def test_no_waves_below_degree_one():
    with pytest.raises(ValueError, match="at least 1"):
        wave_basis(0)


@pytest.mark.parametrize("reach", [0.05, 1.0, 6.0, 40.0])
def test_fields_are_those_made_of_scipy_functions(reach):
    basis = wave_basis(8)
    at = points(reach=reach)
    fields = wave_fields(basis, at)
    assert fields.shape == (len(basis), 3, len(at))
    labels = zip(basis.kind, basis.degree, basis.order, basis.sine, strict=True)
    for field, (kind, n, m, sine) in zip(fields, labels, strict=True):
        expected = waves.real_wave(kind, n, m, sine, at)
        # rounding: relative to the wave's own size
        np.testing.assert_allclose(field, expected, atol=2e-12 * np.abs(expected).max())


def test_the_axis_and_the_origin_are_regular_points():
    basis = wave_basis(6)
    on = np.array([[0.0, 0.0, 2.0], [0.0, 0.0, -3.1], [0.0, 0.0, 0.0]])
    near = on + np.array([2e-7, 3e-7, 0.0])
    # fields change by about the distance
    np.testing.assert_allclose(wave_fields(basis, on), wave_fields(basis, near), atol=1e-6)
    # At the origin only the electric dipole waves are left: (2/3) sqrt(3/(8 pi)) along an axis
    # (RgN of degree 1: j_1/r -> 1/3).
    origin = wave_fields(basis, on[2:])[:, :, 0]
    dipole = (basis.degree == 1) & (basis.kind == ELECTRIC)
    size = np.linalg.norm(origin, axis=1)
    np.testing.assert_allclose(size[dipole], 2 / 3 * np.sqrt(3 / (8 * np.pi)), rtol=1e-8)
    assert np.all(size[~dipole] < 1e-8)


def test_zeros_of_the_bessel_functions_do_no_harm():
    # j_0 vanishes at multiples of pi, j_1 at 4.4934...; the recurrence must be scaled there too.
    r = np.array([np.pi, 2 * np.pi, 4.493409457909064, 1e-3, 0.7, 30 * np.pi])
    at = r[:, None] * np.array([0.36, 0.48, 0.8])
    basis = wave_basis(4)
    fields = wave_fields(basis, at)
    labels = zip(basis.kind, basis.degree, basis.order, basis.sine, strict=True)
    for field, label in zip(fields, labels, strict=True):
        expected = waves.real_wave(*label, at)
        np.testing.assert_allclose(field, expected, atol=1e-13)


def curl_and_divergence(basis, at, step):
    """Central differences of fourth order."""
    gradient = np.zeros((3, len(basis), 3, len(at)))
    for axis in range(3):
        shift = np.zeros(3)
        shift[axis] = step
        one = wave_fields(basis, at + shift) - wave_fields(basis, at - shift)
        two = wave_fields(basis, at + 2 * shift) - wave_fields(basis, at - 2 * shift)
        gradient[axis] = (8 * one - two) / (12 * step)
    curl = np.stack(
        [
            gradient[1][:, 2] - gradient[2][:, 1],
            gradient[2][:, 0] - gradient[0][:, 2],
            gradient[0][:, 1] - gradient[1][:, 0],
        ],
        axis=1,
    )
    return curl, gradient[0][:, 0] + gradient[1][:, 1] + gradient[2][:, 2]


def test_fields_obey_maxwell():
    # k = 1: curl M = N, curl N = M, so curl curl E = E; div E = 0. Differences of
    # step 0.01 err by about step^4 / 30 and rounding over the step.
    basis = wave_basis(5)
    at = points(15, reach=3.0)
    curl, divergence = curl_and_divergence(basis, at, 0.01)
    fields = wave_fields(basis, at)
    place = {
        key: i
        for i, key in enumerate(zip(basis.kind, basis.degree, basis.order, basis.sine, strict=True))
    }
    partner = [place[1 - k, n, m, s] for (k, n, m, s) in place]
    np.testing.assert_allclose(curl, fields[partner], atol=1e-8)
    np.testing.assert_allclose(divergence, 0.0, atol=1e-8)
    assert np.abs(fields).max(axis=(1, 2)).min() > 1e-3


def test_waves_are_orthogonal_on_a_sphere_with_the_norms_of_their_radial_parts():
    # int |M|^2 dOmega = j_n^2 and int |N|^2 dOmega = n(n+1) (j_n/r)^2 + ([r j_n]'/r)^2
    # (Morse & Feshbach 1953, section 13.3); the quadrature is exact.
    n_max, r = 5, 2.3
    node, weight = np.polynomial.legendre.leggauss(n_max + 2)
    count = 2 * n_max + 2
    theta, phi = np.meshgrid(np.arccos(node), 2 * np.pi * np.arange(count) / count, indexing="ij")
    radial, _, _ = waves.unit_vectors(theta.ravel(), phi.ravel())
    fields = wave_fields(wave_basis(n_max), r * radial.T)
    weights = np.repeat(weight, count) * 2 * np.pi / count
    gram = np.einsum("wip,vip,p->wv", fields, fields, weights)
    basis = wave_basis(n_max)
    n = basis.degree
    j = spherical_jn(n, r)
    across = spherical_jn(n, r, derivative=True) + j / r
    electric = n * (n + 1) * (j / r) ** 2 + across**2
    expected = np.where(basis.kind == MAGNETIC, j**2, electric)
    np.testing.assert_allclose(gram, np.diag(expected), atol=1e-14)


def test_parity_by_reflecting_the_points():
    basis = wave_basis(5)
    at = points(6)
    fields = wave_fields(basis, at)
    parity = basis.parity()
    for axis in range(3):
        mirror = np.ones(3)
        mirror[axis] = -1.0
        reflected = wave_fields(basis, at * mirror)
        # even: the mirror image of the field is the field at the mirrored point
        sign = np.where(parity[axis] == 1, -1.0, 1.0)
        expected = sign[:, None, None] * mirror[:, None] * fields
        np.testing.assert_allclose(reflected, expected, atol=1e-14)


@pytest.mark.parametrize(
    "mirrors",
    [(True, True, True), (True, False, True), (False, True, False), (False, False, False)],
)
def test_classes_collect_the_parities_of_the_planes_declared(mirrors):
    basis = wave_basis(4)
    axes = [axis for axis in range(3) if mirrors[axis]]
    parity = basis.parity()
    expected = sum(
        (parity[axis] << bit for bit, axis in enumerate(axes)), np.zeros(len(basis), int)
    )
    np.testing.assert_array_equal(basis.class_of(mirrors), expected)
    assert set(expected) == set(range(2 ** len(axes)))


@pytest.mark.parametrize("n_max", [1, 4])
def test_complex_waves_are_a_unitary_change(n_max):
    change, labels = complex_from_real(n_max)
    np.testing.assert_allclose(change @ change.conj().T, np.eye(len(change)), atol=1e-15)
    assert sorted(zip(labels.order, labels.kind, labels.degree, strict=True)) == list(
        zip(labels.order, labels.kind, labels.degree, strict=True)
    )
    # sum_w p_w E_w is the same field in both bases: the complex waves are conj(W) E
    at = points(5)
    fields = np.tensordot(change.conj(), wave_fields(wave_basis(n_max), at), 1)
    for field, (kind, n, m) in zip(
        fields, zip(labels.kind, labels.degree, labels.order, strict=True), strict=True
    ):
        np.testing.assert_allclose(field, waves.complex_wave(kind, n, m, at), atol=1e-14)
