"""Interpolated starts: weights, choice of nodes, bookkeeping of waves."""

from dataclasses import dataclass

import numpy as np
import pytest

from scatterloom.solve.start import (
    StoredFields,
    interpolated_start,
    lagrange_weights,
    nearest,
    rational_weights,
)


@pytest.mark.parametrize("nodes", [[2.0], [1.0, 1.5], [1.0, 1.2, 1.7], [1.0, 1.1, 1.3, 2.0]])
def test_weights_reproduce_polynomials(nodes):
    at = np.array(nodes)
    for x in (1.05, 1.25, 1.9, *nodes):
        weights = lagrange_weights(nodes, x)
        for degree in range(len(nodes)):
            assert weights @ at**degree == pytest.approx(x**degree, rel=1e-12)
    np.testing.assert_allclose(
        lagrange_weights(nodes, nodes[-1]), np.arange(len(nodes)) == len(nodes) - 1
    )


@dataclass(frozen=True)
class Node:
    size_parameter: float


def test_nodes_lie_on_both_sides_where_there_are_any():
    nodes = [Node(x) for x in (3.0, 1.0, 2.0, 5.0, 4.0, 6.0)]

    def chosen(x, each_side=2):
        return [node.size_parameter for node in nearest(nodes, x, each_side)]

    assert chosen(3.5) == [2.0, 3.0, 4.0, 5.0]
    assert chosen(3.5, 1) == [3.0, 4.0]
    # at an end, the other side makes up
    assert chosen(1.5) == chosen(0.5) == [1.0, 2.0, 3.0, 4.0]
    assert chosen(5.5) == chosen(7.0) == [3.0, 4.0, 5.0, 6.0]
    assert nearest(nodes[:3], 1.5) == [Node(1.0), Node(2.0), Node(3.0)]
    assert nearest(nodes[:0], 1.5) == []


POLES = (1.4 - 0.2j, 2.3 - 0.5j, 1.1 - 0.3j)


def stored(x, rows):
    """Fields of two parts: one as 1/(x - pole), the pole that of the row, and one constant."""
    return StoredFields(
        x,
        [
            np.array([field(x, r, c) for r in range(count)], np.complex64)
            for c, count in enumerate(rows)
        ],
    )


def field(x, r, c):
    return [(r + 1) / (x - POLES[r]), c + 1j, 0.3 / (x - POLES[r]), 2.0 + c]


def test_start_interpolates_row_by_row_and_scales_by_the_norms():
    neighbours = [stored(x, (3, 2)) for x in (1.0, 1.5, 2.0)]
    norms = [np.array([1.0, 2.0, 3.0]), np.array([0.5, 4.0])]
    start = interpolated_start(neighbours, 1.2)(norms)
    polynomial = lagrange_weights((1.0, 1.5, 2.0), 1.2)
    missed = []
    for c, (rows, norm) in enumerate(zip(start, norms, strict=True)):
        assert rows.dtype == np.complex64
        for r, row in enumerate(rows):
            # A pole is found from the fields alone, to the error that they may have.
            exact = norm[r] * np.array(field(1.2, r, c))
            np.testing.assert_allclose(row, exact, rtol=2e-3)
            plain = norm[r] * sum(
                w * n.rows[c][r] for w, n in zip(polynomial, neighbours, strict=True)
            )
            missed.append(np.abs(plain / exact - 1.0).max())
    assert max(missed) > 0.3
    # at an anchor itself, its own fields
    for rows, own, norm in zip(
        interpolated_start(neighbours, 1.5)(norms), neighbours[1].rows, norms, strict=True
    ):
        np.testing.assert_array_equal(rows, own * norm[:, None].astype(np.float32))


@pytest.mark.parametrize("nodes", [[2.0], [1.0, 1.5], [1.0, 1.2, 1.7], [1.0, 1.1, 1.3, 2.0]])
def test_rational_weights_interpolate(nodes):
    rng = np.random.default_rng(3)
    values = rng.normal(size=(5, len(nodes), 9)) + 1j * rng.normal(size=(5, len(nodes), 9))
    products = values @ values.conj().transpose(0, 2, 1)
    # constants stay, whatever the denominator
    weights = rational_weights(nodes, 1.25, products)
    np.testing.assert_allclose(weights.sum(axis=1), 1.0, atol=1e-12)
    assert np.abs(weights).max() <= 30.0
    # next to a node, the value there
    near = rational_weights(nodes, nodes[0] + 1e-7, products)
    np.testing.assert_allclose(
        near, np.broadcast_to(np.arange(len(nodes)) == 0, near.shape), atol=1e-4
    )


def test_fields_equal_within_their_errors_are_interpolated_by_a_polynomial():
    # Differences below the errors of the fields say nothing about poles.
    rng = np.random.default_rng(4)
    nodes, x = [1.0, 1.01, 1.02, 1.03], 1.015
    values = 1.0 + 1e-5 * rng.normal(size=(3, 4, 50))
    weights = rational_weights(nodes, x, (values @ values.transpose(0, 2, 1)).astype(complex))
    np.testing.assert_allclose(weights, np.tile(lagrange_weights(nodes, x), (3, 1)), atol=1e-2)


def test_a_root_of_the_denominator_nearby_is_not_believed():
    # Fields with a pole on the real axis, next to the size wanted.
    nodes, x = [1.0, 1.5, 2.0], 1.7
    values = np.array([[[1.0 / (node - x - 1e-6), 1.0] for node in nodes]])
    weights = rational_weights(nodes, x, (values @ values.transpose(0, 2, 1)).astype(complex))
    np.testing.assert_allclose(weights[0], lagrange_weights(nodes, x))


def test_waves_that_a_neighbour_lacks_come_from_the_others():
    neighbours = [stored(1.0, (2, 1)), stored(2.0, (3, 2))]
    kept = [rows.copy() for n in neighbours for rows in n.rows]
    start = interpolated_start(neighbours, 1.5)([np.ones(4), np.ones(2)])
    assert [rows.shape for rows in start] == [(4, 4), (2, 4)]
    # both have the first two, one the third, none the fourth
    both = np.stack([neighbours[0].rows[0], neighbours[1].rows[0][:2]], axis=1)
    weights = rational_weights((1.0, 2.0), 1.5, both @ both.conj().transpose(0, 2, 1))
    np.testing.assert_allclose(start[0][:2], (weights[:, None] @ both)[:, 0], rtol=1e-5)
    np.testing.assert_array_equal(start[0][2], neighbours[1].rows[0][2])
    assert not start[0][3].any()
    np.testing.assert_array_equal(start[1][1], neighbours[1].rows[1][1])
    # a shorter basis than the neighbours'
    short = interpolated_start(neighbours, 1.5)([np.ones(1), np.ones(1)])
    assert [rows.shape for rows in short] == [(1, 4), (1, 4)]
    for rows, before in zip([r for n in neighbours for r in n.rows], kept, strict=True):
        np.testing.assert_array_equal(rows, before)


def test_no_start_from_nothing():
    with pytest.raises(ValueError, match="at least one"):
        interpolated_start([], 1.0)
