"""Cells of several materials and with edges: limits that are known in closed form."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from lattice_kit import surfaces_of
from oracles import dense
from scatterloom.dipole import mixture
from scatterloom.dipole.exchange import exchanges
from scatterloom.dipole.mixture import mixed_cell_tensors, particle_tensors
from scatterloom.dipole.polarizability import boundary_shift, cell_tensors, self_term
from scatterloom.particle.lattice import Composition, lattice
from scatterloom.particle.shapes import from_spec

KD = 0.2
TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()
OBLATE = {"kind": "spheroid", "equatorial_to_polar": 2.0}
BRICK = {"kind": "cuboid", "edges": [1, 0.77, 0.53]}
COLUMN = {"kind": "prism", "sides": 6, "height_to_width": 1.5}


def as_matrices(six):
    xx, yy, zz, xy, xz, yz = six.T
    return np.moveaxis(np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]]), -1, 0)


def with_composition(grid):
    """The same particle of one material, described the general way."""
    surfaces = surfaces_of(grid.interfaces, grid.area_vector)
    return replace(grid, composition=Composition(grid.fraction, surfaces))


def one_cell(fraction, interfaces, vectors):
    """A lattice of one cell, without exchange."""
    grid = lattice(from_spec(OBLATE), 2)
    composition = Composition(
        np.array(fraction, dtype=float)[:, None],
        surfaces_of(interfaces, np.array(vectors, dtype=float)[:, None, :]),
    )
    total = composition.fraction.sum(axis=0)
    return replace(grid, box=(1, 1, 1), cell=np.zeros((1, 3), int), fill=total,
                   composition=composition)  # fmt: skip


def permittivity_of(tensors):
    """Permittivity tensor of the first cell, back from its polarizability."""
    root = as_matrices(tensors.root)[0]
    inverse = np.linalg.inv(root @ root) + self_term(KD) / KD**3 * np.eye(3)
    return np.eye(3) + 4 * np.pi / KD**3 * np.linalg.inv(inverse)


@pytest.mark.parametrize("turn", [None, TURN], ids=["aligned", "turned"])
@pytest.mark.parametrize("index", [1.33, 1.5 + 0.01j, 2.0 + 0.5j, 0.2 + 3.0j])
def test_one_material_the_general_way(index, turn):
    grid = lattice(from_spec(OBLATE), 10, turn)
    special = cell_tensors(grid.fill, grid.normal, index, KD, grid.area)
    general = mixed_cell_tensors(with_composition(grid), [index], KD)
    assert general.arithmetic == special.arithmetic
    # in almost empty cells the permittivity exceeds 1 by little more than rounding errors
    scale = np.abs(special.root).max()
    np.testing.assert_allclose(general.root, special.root, rtol=0, atol=1e-10 * scale)
    scale = np.abs(special.loss).max()
    np.testing.assert_allclose(general.loss, special.loss, rtol=0, atol=1e-8 * scale)
    dispatched = particle_tensors(grid, [index], KD)
    np.testing.assert_array_equal(dispatched.root, special.root)


@pytest.mark.parametrize("spec", [OBLATE, BRICK, COLUMN], ids=lambda s: s["kind"])
def test_core_and_coating_of_one_material_are_one(spec):
    """Equal indices: the inner interface has no contrast and leaves no trace."""
    index = 1.6 + 0.1j
    plain = particle_tensors(lattice(from_spec(spec), 9, TURN), [index], KD)
    coated = lattice(from_spec({**spec, "core_radius_fraction": 0.5}), 9, TURN)
    both = particle_tensors(coated, [index, index], KD)
    scale = np.abs(plain.root).max()
    np.testing.assert_allclose(both.root, plain.root, rtol=0, atol=1e-10 * scale)


@pytest.mark.parametrize("names", [("coating", "core"), ("core",), ("coating", "core", "heart")])
def test_one_index_for_each_material(names):
    grid = lattice(from_spec({**OBLATE, "core_radius_fraction": 0.5}), 4)
    if len(names) == 2:
        assert particle_tensors(grid, [1.3, 1.5], KD).root.shape == (len(grid.cell), 6)
    else:
        with pytest.raises(ValueError, match=f"{len(names)} refractive indices for 2 materials"):
            particle_tensors(grid, [1.5] * len(names), KD)


def test_layers_across_a_cell_have_both_means(monkeypatch):
    # coating, core, medium in parallel layers: harmonic along the normal, arithmetic across
    monkeypatch.setattr(mixture, "boundary_shift", lambda n, e: (np.zeros(len(n)), 0.0))
    e1, e2 = 1.4**2, (1.7 + 0.2j) ** 2
    n = np.array([0.6, 0.0, 0.8])
    grid = one_cell([0.3, 0.5], [(0, -1), (1, 0)], [0.9 * n, n])
    found = permittivity_of(mixed_cell_tensors(grid, [1.4, 1.7 + 0.2j], KD))
    mean = 0.2 + 0.3 * e1 + 0.5 * e2
    harmonic = 1 / (0.2 + 0.3 / e1 + 0.5 / e2)
    expected = mean * (np.eye(3) - np.outer(n, n)) + harmonic * np.outer(n, n)
    np.testing.assert_allclose(found, expected, rtol=1e-10, atol=1e-12)


def test_a_thin_plate_keeps_its_normal_where_area_vectors_cancel(monkeypatch):
    # Both faces of a film within one cell: the mean normal vanishes, the film does not.
    monkeypatch.setattr(mixture, "boundary_shift", lambda n, e: (np.zeros(len(n)), 0.0))
    eps, f = 2.25, 0.2
    grid = one_cell([f], [(0, -1), (0, -1)], [[0, 0, 1], [0, 0, -1]])
    found = permittivity_of(mixed_cell_tensors(grid, [1.5], KD))
    mean, harmonic = 1 + f * (eps - 1), 1 / (1 + f * (1 / eps - 1))
    np.testing.assert_allclose(found, np.diag([mean, mean, harmonic]), rtol=1e-10, atol=1e-12)


def test_a_corner_is_isotropic(monkeypatch):
    # Three equal faces: each axis a third of the way from the arithmetic to the harmonic mean.
    monkeypatch.setattr(mixture, "boundary_shift", lambda n, e: (np.zeros(len(n)), 0.0))
    eps, f = 4.0, 0.125
    grid = one_cell([f], [(0, -1)] * 3, 0.25 * np.eye(3))
    found = permittivity_of(mixed_cell_tensors(grid, [2.0], KD))
    mean, harmonic = 1 + f * (eps - 1), 1 / (1 + f * (1 / eps - 1))
    inverse = 1 / (3 * harmonic) + 2 / (3 * mean)
    np.testing.assert_allclose(found, np.eye(3) / inverse, rtol=1e-10, atol=1e-12)


def test_shift_of_an_inner_interface_is_relative_to_the_coating():
    # Scaling all permittivities scales the means: inside a coating of e2 a core of e1 is
    # shifted as a particle of e1/e2 in vacuum.
    n = np.array([[0.48, 0.6, 0.64]])
    e1, e2 = 1.7**2, 1.3**2
    along, across = boundary_shift(n, e1 / e2)
    f, area = 0.4, 0.8
    grid = one_cell([1 - f, f], [(1, 0)], [area * n[0]])
    found = permittivity_of(mixed_cell_tensors(grid, [1.3, 1.7], KD))
    ratio = e1 / e2
    mean = e2 * (1 + (f + across * area) * (ratio - 1))
    harmonic = e2 / (1 + (f + along[0] * area) * (1 / ratio - 1))
    dyad = np.outer(n, n)
    expected = mean * (np.eye(3) - dyad) + harmonic * dyad
    np.testing.assert_allclose(found, expected, rtol=1e-10, atol=1e-12)


@pytest.mark.parametrize("edges", [[1, 1, 1], [1, 0.77, 0.53], [1, 1.6, 2.7]], ids=str)
@pytest.mark.parametrize("cells", [12, 17, 24])
def test_exchange_leaves_sums_over_cells_an_error_of_third_order(edges, cells):
    """Sums of quadratic functions over the cells against their integrals over a cuboid.

    With the second-order term taken away 2 to 6 times n^-3 of the largest one is left
    (measured, n = 9 to 48); the fill fractions alone leave more than 1 n^-2.
    """
    shape = from_spec({"kind": "cuboid", "edges": edges})
    grid = lattice(shape, cells)
    exact = shape.volume * shape.half_extents**2 / 3
    moved = grid.fill.copy()
    for step in exchanges(grid):
        np.add.at(moved, step.giver, -step.amount)
        np.add.at(moved, step.taker, step.amount)
    assert moved.sum() == pytest.approx(grid.fill.sum(), rel=1e-12)
    errors = [
        np.abs(fill @ grid.centre() ** 2 * grid.spacing**3 - exact).max() / exact.max()
        for fill in (grid.fill, moved)
    ]
    assert errors[1] < 7.0 * cells**-3
    assert errors[1] < 0.3 * errors[0]


def test_exchange_only_along_the_lattice():
    column = lattice(from_spec(COLUMN), 10)
    oblique = np.any(
        np.abs(column.area_vector).max(axis=2) < 0.99 * np.linalg.norm(column.area_vector, axis=2),
        axis=0,
    )
    assert oblique.any()
    steps = list(exchanges(column))
    assert sum(step.giver.size for step in steps) > 50
    for step in steps:
        assert not oblique[step.giver].any()
        # on flat faces at most an eighth of a cell is passed on inwards, 1/24 outwards
        assert np.all((step.amount <= 0.125) & (step.amount > -0.05))
    assert all(step.giver.size == 0 for step in exchanges(lattice(from_spec(BRICK), 9, TURN)))


def test_no_exchange_for_ellipsoids():
    assert not list(exchanges(lattice(from_spec(OBLATE), 6, TURN)))
    coated = lattice(from_spec({**OBLATE, "core_radius_fraction": 0.5}), 6)
    assert not list(exchanges(coated))


@pytest.mark.parametrize(
    ("spec", "indices"),
    [
        ({**OBLATE, "core_radius_fraction": 0.6}, [1.4 + 0.05j, 1.8 + 0.3j]),
        (COLUMN, [1.6 + 0.2j]),
        ({**BRICK, "core_radius_fraction": 0.6}, [1.4 + 0.05j, 1.8 + 0.3j]),
    ],
)
def test_loss_is_the_power_absorbed(spec, indices):
    grid = lattice(from_spec(spec), 7, TURN)
    cells = particle_tensors(grid, indices, KD)
    root = as_matrices(cells.root)
    rng = np.random.default_rng(6)
    shape = (len(root), 3)
    x = rng.normal(size=shape) + 1j * rng.normal(size=shape)
    moment = np.einsum("nij,nj->ni", root, x)
    # E = (V chi)^-1 P = (alpha^-1 + g0/V) P
    inverse = np.linalg.inv(root @ root) + self_term(KD) / KD**3 * np.eye(3)
    power = np.sum(moment * np.einsum("nij,nj->ni", inverse, moment).conj(), axis=1).imag
    found = np.einsum("ni,nij,nj->n", x.conj(), as_matrices(cells.loss), x)
    np.testing.assert_allclose(found, power, rtol=1e-6, atol=1e-9 * np.abs(power).max())
    # and no loss without absorption
    assert not particle_tensors(grid, [complex(m).real for m in indices], KD).loss.any()


def test_metals_fall_back_to_the_arithmetic_mean():
    grid = lattice(from_spec(COLUMN), 6)
    index = 0.2 + 3.0j
    cells = particle_tensors(grid, [index], KD)
    assert cells.arithmetic
    eps = (1 + grid.fill * (index**2 - 1))[:, None, None] * np.eye(3)
    root = as_matrices(cells.root)
    alpha = dense.cell_polarizability(eps, 1.0, KD)
    np.testing.assert_allclose(root @ root, alpha, atol=1e-13 * np.abs(alpha).max())
