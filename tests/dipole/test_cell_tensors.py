"""Polarizability and absorption of single cells, against closed forms and the dense oracle."""

import numpy as np
import pytest

from lattice_kit import root_of
from oracles import dense
from scatterloom.dipole.kernel import radial_parts
from scatterloom.dipole.polarizability import boundary_shift, cell_tensors, self_term

INDICES = [1.33, 1.5 + 0.01j, 2.0 + 0.5j, 0.8 + 0.3j]


def as_matrices(six):
    xx, yy, zz, xy, xz, yz = six.T
    return np.moveaxis(np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]]), -1, 0)


def some_cells(count=12, seed=3):
    rng = np.random.default_rng(seed)
    fill = rng.uniform(0.01, 0.99, count)
    normal = rng.normal(size=(count, 3))
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    fill[-2:], normal[-2:] = 1.0, 0.0
    return fill, normal


def test_self_term_is_the_filtered_field_at_zero_distance():
    # The filtered field of a dipole is finite at its own place; near it, it departs
    # by (pi R / kd)^2 / 10.
    for kd in (0.1, 0.5, 1.5):
        iso, rad = radial_parts(np.array([0.01 * kd]), kd)
        assert kd**3 * iso[0] == pytest.approx(self_term(kd), rel=1e-3)
        assert abs(rad[0]) < 2e-3 * abs(iso[0])


def test_radiation_of_one_cell_is_that_of_a_dipole():
    # Imaginary part (2/3) k^3 V: radiation reaction of a point dipole (Draine 1988).
    for kd in (0.1, 0.7):
        assert self_term(kd).imag == pytest.approx(2 / 3 * kd**3, rel=1e-14)


@pytest.mark.parametrize("index", INDICES)
@pytest.mark.parametrize("kd", [0.05, 0.4])
def test_root_squares_to_the_polarizability(index, kd):
    fill, normal = some_cells()
    cells = cell_tensors(fill, normal, index, kd)
    root = as_matrices(cells.root)
    eps = dense.cell_permittivity(fill, normal, complex(index) ** 2)
    alpha = dense.cell_polarizability(eps, 1.0, kd)
    np.testing.assert_allclose(root @ root, alpha, atol=1e-13 * np.abs(alpha).max())
    # the principal root, so that it is continuous in the fill fraction
    np.testing.assert_allclose(root, root_of(alpha), atol=1e-12 * np.abs(root).max())
    assert not cells.arithmetic


@pytest.mark.parametrize("index", INDICES)
def test_full_cells_have_the_closed_form(index):
    # 1/alpha = 1/(V chi) - g0/V; in the static limit g0 = -(4 pi/3)(pi/6), the
    # depolarization of the filtered cell (Gay-Balmaz & Martin 2002).
    eps = complex(index) ** 2
    kd = 1e-4
    cells = cell_tensors(np.ones(1), np.zeros((1, 3)), index, kd)
    static = kd**3 / (4 * np.pi / (eps - 1) + 4 * np.pi / 3 * np.pi / 6)
    alpha = as_matrices(cells.root)[0] @ as_matrices(cells.root)[0]
    # corrections of the order of kd^2
    np.testing.assert_allclose(alpha, static * np.eye(3), rtol=1e-7, atol=1e-7 * abs(static))


def test_almost_full_cells_forget_their_normal():
    fill, normal = np.array([1.0 - 1e-9, 1.0]), np.array([[0.6, 0.0, 0.8], [0.0, 0.0, 0.0]])
    cells = cell_tensors(fill, normal, 1.5 + 0.1j, 0.3)
    # linear in the missing volume
    scale = np.abs(cells.root).max()
    np.testing.assert_allclose(cells.root[0], cells.root[1], atol=1e-8 * scale)
    np.testing.assert_allclose(cells.loss[0], cells.loss[1], atol=1e-7 * np.abs(cells.loss).max())


def test_almost_empty_cells_polarize_as_a_thin_film():
    # A little matter responds along the normal with (eps - 1)/eps and across it with
    # eps - 1 (continuity of D and E), times its volume over 4 pi.
    index, kd, fill = 1.7 + 0.2j, 0.2, 1e-7
    cells = cell_tensors(np.array([fill]), np.array([[0.0, 0.0, 1.0]]), index, kd)
    alpha = as_matrices(cells.root)[0] @ as_matrices(cells.root)[0]
    chi = (index**2 - 1) / (4 * np.pi)
    expected = fill * kd**3 * chi * np.diag([1.0, 1.0, 1.0 / index**2])
    np.testing.assert_allclose(alpha, expected, rtol=1e-5, atol=1e-12 * abs(expected[0, 0]))


@pytest.mark.parametrize("index", [1.5 + 0.01j, 2.0 + 0.5j, 0.3 + 2.0j])
def test_loss_is_the_power_absorbed(index):
    # Im(P . conj(E)) with the field E = (V chi)^-1 P inside the cell.
    kd = 0.35
    fill, normal = some_cells()
    cells = cell_tensors(fill, normal, index, kd)
    eps = dense.cell_permittivity(fill, normal, complex(index) ** 2)
    if cells.arithmetic:
        eps = (1 + fill * (complex(index) ** 2 - 1))[:, None, None] * np.eye(3)
    rng = np.random.default_rng(5)
    x = rng.normal(size=(len(fill), 3)) + 1j * rng.normal(size=(len(fill), 3))
    moment = np.einsum("nij,nj->ni", as_matrices(cells.root), x)
    chi = (eps - np.eye(3)) * kd**3 / (4 * np.pi)
    field = np.linalg.solve(chi, moment[:, :, None])[:, :, 0]
    power = np.sum(moment * field.conj(), axis=1).imag
    found = np.einsum("ni,nij,nj->n", x.conj(), as_matrices(cells.loss), x)
    assert np.all(power > 0)
    np.testing.assert_allclose(found, power, rtol=1e-10)


def test_no_absorption_without_imaginary_index():
    fill, normal = some_cells()
    assert not cell_tensors(fill, normal, 1.6, 0.3).loss.any()


def test_negative_permittivity_falls_back_to_the_arithmetic_mean():
    # The harmonic mean of 1 and a negative permittivity has a pole at some fill fraction.
    fill, normal = some_cells()
    index, kd = 0.2 + 3.0j, 0.2
    cells = cell_tensors(fill, normal, index, kd)
    assert cells.arithmetic
    eps = (1 + fill * (index**2 - 1))[:, None, None] * np.eye(3)
    root = as_matrices(cells.root)
    alpha = dense.cell_polarizability(eps, 1.0, kd)
    np.testing.assert_allclose(root @ root, alpha, atol=1e-13 * np.abs(alpha).max())


def test_the_interface_shift_changes_the_fill_of_cut_cells():
    # A shift h of the interface adds the volume h times its area; here with the fill of the
    # mean along the normal and of the one across it shifted each by its own h.
    fill, normal = some_cells()
    area = np.where(fill < 1.0, 0.9, 0.0)
    index, kd = 1.6, 0.3
    along, across = boundary_shift(normal, index**2)
    shifted = as_matrices(cell_tensors(fill, normal, index, kd, area).root)
    parts = [
        dense.cell_polarizability(
            dense.cell_permittivity((fill + area * shift).real, normal, index**2), 1.0, kd
        )
        for shift in (along, across)
    ]
    dyad = normal[:, :, None] * normal[:, None, :]
    alpha = dyad @ parts[0] + (np.eye(3) - dyad) @ parts[1]
    np.testing.assert_allclose(shifted @ shifted, alpha, atol=1e-13 * np.abs(alpha).max())
    # full cells and interfaces without area keep their fill
    plain = cell_tensors(fill, normal, index, kd)
    none = cell_tensors(fill, normal, index, kd, np.zeros_like(area))
    np.testing.assert_array_equal(none.root, plain.root)
    np.testing.assert_array_equal(
        cell_tensors(fill, normal, index, kd, area).root[-2:], plain.root[-2:]
    )
    assert np.all(np.abs(shifted[:-2] - as_matrices(plain.root)[:-2]).max(axis=(1, 2)) > 0)


def test_the_interface_shift_keeps_energy():
    # A complex shift makes a complex fill: the loss must be that of the shifted cell.
    fill, normal = some_cells()
    area = np.where(fill < 1.0, 1.0, 0.0)
    index, kd = 1.5 + 0.2j, 0.3
    cells = cell_tensors(fill, normal, index, kd, area)
    rng = np.random.default_rng(6)
    x = rng.normal(size=(len(fill), 3)) + 1j * rng.normal(size=(len(fill), 3))
    root = as_matrices(cells.root)
    moment = np.einsum("nij,nj->ni", root, x)
    # E = (V chi)^-1 P = (alpha^-1 + g0/V) P
    inverse = np.linalg.inv(root @ root) + self_term(kd) / kd**3 * np.eye(3)
    field = np.einsum("nij,nj->ni", inverse, moment)
    power = np.sum(moment * field.conj(), axis=1).imag
    found = np.einsum("ni,nij,nj->n", x.conj(), as_matrices(cells.loss), x)
    np.testing.assert_allclose(found, power, rtol=1e-9)
    assert not cell_tensors(fill, normal, 1.6, kd, area).loss.any()


def test_no_shift_without_contrast_or_with_negative_permittivity():
    fill, normal = some_cells()
    along, across = boundary_shift(normal, 1.0 + 0.0j)
    assert not along.any() and across == 0.0
    # interfaces parallel to the lattice planes are not shifted along the normal
    along, _ = boundary_shift(np.eye(3), 2.25)
    np.testing.assert_allclose(along, 0.0, atol=1e-15)
    # and most where they are parallel to none of them
    tilted = np.array([[1.0, 1.0, 0.0], [1.0, 1.0, 1.0]]) / np.sqrt([[2.0], [3.0]])
    along, _ = boundary_shift(tilted, 2.25)
    assert 0.0 < abs(along[0]) < abs(along[1])
    area = np.ones_like(fill)
    metal = 0.2 + 3.0j
    np.testing.assert_array_equal(
        cell_tensors(fill, normal, metal, 0.2, area).root,
        cell_tensors(fill, normal, metal, 0.2).root,
    )
