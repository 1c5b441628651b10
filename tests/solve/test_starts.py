"""Interpolated starts: weights, choice of nodes, bookkeeping of waves."""

from dataclasses import dataclass

import numpy as np
import pytest

from scatterloom.solve.start import StoredFields, interpolated_start, lagrange_weights, nearest


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


def stored(x, rows):
    """Fields whose rows are (row + 1) x^2 + class: a polynomial in size."""
    return StoredFields(
        x,
        [
            np.array([[(r + 1) * x**2 + c + 1j] * 4 for r in range(count)], np.complex64)
            for c, count in enumerate(rows)
        ],
    )


def test_start_interpolates_row_by_row_and_scales_by_the_norms():
    neighbours = [stored(x, (3, 2)) for x in (1.0, 1.5, 2.0)]
    norms = [np.array([1.0, 2.0, 3.0]), np.array([0.5, 4.0])]
    start = interpolated_start(neighbours, 1.2)(norms)
    for c, (rows, norm) in enumerate(zip(start, norms, strict=True)):
        assert rows.dtype == np.complex64
        for r, row in enumerate(rows):
            # single precision, weights of order one
            np.testing.assert_allclose(row, norm[r] * ((r + 1) * 1.2**2 + c + 1j), rtol=1e-6)


def test_waves_that_a_neighbour_lacks_come_from_the_others():
    neighbours = [stored(1.0, (2, 1)), stored(2.0, (3, 2))]
    kept = [rows.copy() for n in neighbours for rows in n.rows]
    start = interpolated_start(neighbours, 1.5)([np.ones(4), np.ones(2)])
    assert [rows.shape for rows in start] == [(4, 4), (2, 4)]
    # both have the first two, one the third, none the fourth
    np.testing.assert_allclose(
        start[0][:2], (neighbours[0].rows[0] + neighbours[1].rows[0][:2]) / 2, rtol=1e-6
    )
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
