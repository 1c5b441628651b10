"""Sectors of lattices that are their own image under the exchange of x and y."""

from dataclasses import replace

import numpy as np
import pytest

from lattice_kit import OBLATE, PROLATE, SPHERE, TRIAXIAL, of_shape, packed_matrix, random_lattice
from scatterloom.dipole.polarizability import cell_tensors
from scatterloom.dipole.sectors import Sectors
from scatterloom.dipole.sectors import exchange_of_cells as exchange_given_tensors
from scatterloom.solve.block import solve_block
from scatterloom.transition.matrix import from_amplitudes
from scatterloom.waves.basis import wave_basis
from scatterloom.waves.fields import wave_fields
from scatterloom.waves.incident import incident_block

INDEX, SIZE, N_MAX = 1.6 + 0.05j, 1.5, 5
RNG = np.random.default_rng(5)


def exchange_of_cells(cells):
    kd = SIZE * cells.spacing
    tensors = cell_tensors(cells.fill, cells.normal, INDEX, kd, cells.area)
    return exchange_given_tensors(cells, tensors)


def random_rows(rows, columns):
    return RNG.normal(size=(rows, columns)) + 1j * RNG.normal(size=(rows, columns))


@pytest.mark.parametrize("spec", [SPHERE, OBLATE, PROLATE])
def test_axial_shapes_are_their_own_image(spec):
    cells = of_shape(spec, 8)
    image = exchange_of_cells(cells)
    np.testing.assert_array_equal(cells.cell[image], cells.cell[:, [1, 0, 2]])
    np.testing.assert_array_equal(image[image], np.arange(len(image)))


def test_lattices_that_are_not_are_found_out():
    assert exchange_of_cells(of_shape(TRIAXIAL, 8)) is None
    assert exchange_of_cells(random_lattice((8, 8, 4), (True, True, True))) is None
    good = of_shape(OBLATE, 8)
    assert exchange_of_cells(good) is not None
    assert exchange_of_cells(replace(good, mirrors=(True, False, True))) is None
    # one cell is enough, be it its fill, its surface or the direction of it
    inside = np.flatnonzero(good.cell[:, 0] != good.cell[:, 1])[0]
    for name in ("fill", "area"):
        values = getattr(good, name).copy()
        values[inside] += 1e-6
        assert exchange_of_cells(replace(good, **{name: values})) is None
    normal = good.normal.copy()
    normal[inside] = normal[inside][[1, 0, 2]]
    assert exchange_of_cells(replace(good, normal=normal)) is None
    # a cell without an image
    keep = np.arange(len(good.cell)) != inside
    arrays = {name: getattr(good, name)[keep] for name in ("cell", "fill", "area", "normal")}
    assert exchange_of_cells(replace(good, **arrays)) is None


def test_waves_under_the_exchange():
    # (Ey, Ex, Ez)(y, x, z) is plus or minus one wave of the basis.
    basis = wave_basis(4)
    points = RNG.normal(size=(7, 3))
    image, sign = basis.exchanged()
    fields = wave_fields(basis, points[:, [1, 0, 2]])[:, [1, 0, 2]]
    expected = sign[:, None, None] * wave_fields(basis, points)[image]
    np.testing.assert_allclose(fields, expected, atol=1e-14)
    np.testing.assert_array_equal(image[image], np.arange(len(basis)))


@pytest.fixture(scope="module", params=[OBLATE, PROLATE, SPHERE], ids=["oblate", "prolate", "ball"])
def problem(request):
    cells = of_shape(request.param, 8)
    matrix = packed_matrix(cells, INDEX, SIZE * cells.spacing)
    return cells, matrix, Sectors(matrix, exchange_of_cells(cells))


def test_parts_and_wholes(problem):
    _, matrix, sectors = problem
    assert len(sectors.all) == 10
    assert sum(sector.copies for sector in sectors.all) == 12
    width = 3 * matrix.n_cell
    for parity in range(8):
        ours = [s for s in sectors.all if s.parity == parity and s.exchange]
        if not ours:
            continue
        rows = random_rows(3, width)
        parts = [sectors.part(s, rows) for s in ours]
        assert sum(part.shape[1] for part in parts) == width
        total = sum(sectors.whole(s, part) for s, part in zip(ours, parts, strict=True))
        np.testing.assert_allclose(total, rows, atol=1e-14)
        for s, part in zip(ours, parts, strict=True):
            whole = sectors.whole(s, part)
            np.testing.assert_allclose(whole @ whole.conj().T, part @ part.conj().T, atol=1e-10)
            np.testing.assert_allclose(sectors.part(s, whole), part, atol=1e-14)


def test_sectors_share_products_without_mixing(problem):
    _, matrix, sectors = problem
    # unequal numbers of rows, none in one sector
    counts = [4, 3, 8, 0, 1, 2, 4, 3, 2, 4]
    blocks = []
    for sector, count in zip(sectors.all, counts, strict=True):
        blocks.append(sectors.part(sector, random_rows(count, 3 * matrix.n_cell)))
    before = matrix.products
    images = sectors.apply(blocks)
    assert matrix.products - before == 4
    for sector, block, image in zip(sectors.all, blocks, images, strict=True):
        packed = np.zeros((8, len(block), 3, matrix.n_cell), complex)
        packed[sector.parity] = sectors.whole(sector, block).reshape(packed.shape[1:])
        whole = matrix(packed)[sector.parity].reshape(len(block), 3 * matrix.n_cell)
        np.testing.assert_allclose(sectors.whole(sector, image), whole, atol=1e-12)


def test_transition_matrix_is_that_of_the_parity_classes(problem):
    cells, matrix, sectors = problem
    basis = wave_basis(N_MAX)
    plain = incident_block(cells, matrix, SIZE, basis)
    fine = incident_block(cells, matrix, SIZE, basis, sectors)
    assert sum(map(len, plain.members)) == len(basis) > sum(map(len, fine.members))
    by_class = solve_block(matrix, plain.rows, 1e-8)
    by_sector = solve_block(matrix, fine.rows, 1e-8, sectors=sectors)
    expected = from_amplitudes(N_MAX, plain.members, by_class.amplitudes).matrix
    found = from_amplitudes(N_MAX, *fine.of_all_waves(by_sector.amplitudes)).matrix
    assert np.linalg.norm(found - expected) < 2e-8 * np.linalg.norm(expected)
    assert by_sector.packed_products <= 0.6 * by_class.packed_products
    # the same measure of error, although some sectors stand for two classes
    assert by_sector.history[0] == pytest.approx(by_class.history[0], rel=1e-6)
    assert by_sector.residual == pytest.approx(by_class.residual, rel=0.1)


def test_starts_are_judged_alike(problem):
    cells, matrix, sectors = problem
    fine = incident_block(cells, matrix, SIZE, wave_basis(N_MAX), sectors)
    cold = solve_block(matrix, fine.rows, 1e-6, sectors=sectors)
    warm = solve_block(matrix, fine.rows, 1e-6, start=cold.fields, sectors=sectors)
    assert not warm.start_dropped
    assert warm.start_residual < 1e-2
    assert warm.packed_products < 0.5 * cold.packed_products
