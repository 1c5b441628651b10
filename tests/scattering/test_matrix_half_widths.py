"""Half widths of matrices: correlation of elements, running maximum, judgement over angle."""

from __future__ import annotations

import numpy as np
import pytest

from oracles.mie import sphere
from scatterloom.scattering import error_bars
from scatterloom.scattering.error_bars import (
    BEST,
    GRID_DEG,
    REMAINDER,
    SCALE,
    matrix_half_widths,
    over_angle,
)
from scatterloom.scattering.expansion import expand, synthesize


@pytest.fixture(scope="module")
def coefficients():
    node, weight = np.polynomial.legendre.leggauss(30)
    matrix = sphere(1.5 + 0.01j, 3.0).scattering_matrix(np.degrees(np.arccos(node)))
    return expand(matrix, node, weight)


def test_what_scales_all_elements_alike_leaves_the_ratios_alone(coefficients) -> None:
    variants = np.stack([coefficients, 1.02 * coefficients])
    element, ratio = matrix_half_widths(variants, (BEST, REMAINDER), 0.0, GRID_DEG)
    share = 0.02 * SCALE[REMAINDER]
    f11 = synthesize(coefficients, GRID_DEG)[:, 0, 0]
    # Never below the share of F11 itself, and above it near slopes by the running maximum.
    assert np.all(element[:, 0, 0] >= share * f11 * (1 - 1e-12))
    np.testing.assert_allclose(ratio[:, 0, 0], share, rtol=1e-10)
    others = np.delete(ratio.reshape(-1, 16), 0, axis=1)
    assert others.max() < 1e-13


def test_bars_of_ratios_are_within_the_bound_from_both_elements(coefficients) -> None:
    """|d(F/F11)| <= (|dF| + |F/F11| |dF11|)/F11, to first order, at every angle of the grid."""
    rng = np.random.default_rng(3)
    off = coefficients * (1 + 1e-6 * rng.normal(size=coefficients.shape))
    variants = np.stack([coefficients, off])
    f = synthesize(coefficients, GRID_DEG)
    f11 = f[:, :1, :1]
    element, ratio = matrix_half_widths(variants, (BEST, REMAINDER), 0.0, GRID_DEG)
    apart = np.abs(synthesize(off, GRID_DEG) - f) * SCALE[REMAINDER]
    bound = (apart + np.abs(f / f11) * apart[:, :1, :1]) / f11
    # The same running maximum as theirs, over 90/l_max degrees on either side.
    reach = round(90 / (len(coefficients) - 1))
    padded = np.pad(bound, ((reach, reach), (0, 0), (0, 0)), mode="edge")
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * reach + 1, axis=0)
    ratio[:, 0, 0] = 0.0
    assert np.all(ratio <= windows.max(axis=-1) * (1 + 1e-5))
    assert ratio.max() > 1e-8
    assert np.all(element >= apart * (1 - 1e-12))


def test_half_widths_between_the_grid_are_interpolated(coefficients) -> None:
    variants = np.stack([coefficients, coefficients * np.linspace(1, 1.1, 30)[:, None, None]])
    angles = np.array([0.0, 0.25, 17.0, 93.6, 179.9, 180.0])
    on_grid = matrix_half_widths(variants, (BEST, REMAINDER), 1e-3, GRID_DEG)
    found = matrix_half_widths(variants, (BEST, REMAINDER), 1e-3, angles)
    for fine, coarse in zip(found, on_grid, strict=True):
        for row, col in np.ndindex(4, 4):
            expected = np.interp(angles, GRID_DEG, coarse[:, row, col])
            np.testing.assert_allclose(fine[:, row, col], expected, rtol=1e-13)


@pytest.mark.parametrize("reach", [1, 2, 3, 7, 45, 90])
def test_running_maximum_is_that_of_every_window(reach: int) -> None:
    values = np.random.default_rng(5).uniform(size=(2, 181, 3))
    found = error_bars._envelope(values, reach)
    for at in (0, 1, 60, 179, 180):
        window = values[:, max(0, at - reach) : at + reach + 1]
        np.testing.assert_array_equal(found[:, at], window.max(axis=1))


def test_judgement_counts_every_degree_alike() -> None:
    half_width = np.zeros((4, 4, 4))
    angles = np.array([0.0, 10.0, 100.0, 180.0])
    half_width[:, 0, 0] = [1.0, 0.0, 0.0, 0.0]
    half_width[:, 3, 3] = 0.25
    half_width[:, 1, 1] = [0.0, 0.0, 0.5, 0.0]
    f11, ratio = over_angle(half_width, angles)
    # The first angle stands for 5 of 180 degrees, the third for 85.
    assert f11 == pytest.approx(np.sqrt(5 / 180))
    assert ratio == pytest.approx(0.5 * np.sqrt(85 / 180))
    only = over_angle(half_width[None, 2:3], angles[2:3])
    assert [float(part[0]) for part in only] == [0.0, 0.5]
