"""Half widths: what they must be whatever their factors are tuned to."""

import numpy as np
import pytest

from oracles import mie
from scatterloom.scattering.error_bars import (
    BEST,
    GRID_DEG,
    SCALE,
    cell_model_error,
    combined,
    matrix_half_widths,
)
from scatterloom.scattering.expansion import expand, synthesize

CAUSES = list(SCALE)


def mie_expansion(index, x=2.0, degree=24):
    node, weight = np.polynomial.legendre.leggauss(degree + 1)
    return expand(mie.sphere(index, x).scattering_matrix(np.degrees(np.arccos(node))), node, weight)


EXPANSIONS = np.stack([mie_expansion(m) for m in (1.5, 1.505, 1.49, 1.5 + 0.003j)])


def test_independent_causes_add_in_squares_and_rivals_do_not():
    first, second = CAUSES[:2]
    deviation = np.array([0.0, 0.3, 0.4, 0.2])
    alone = [SCALE[first] * 0.3, SCALE[second] * 0.4]
    found = combined(deviation, [BEST, first, second, first])
    assert found == pytest.approx(np.hypot(*alone), rel=1e-14)
    assert combined(deviation, [BEST, first, first, first]) == pytest.approx(SCALE[first] * 0.4)
    assert combined(deviation[:1], [BEST]) == 0.0
    assert combined(np.zeros((2, 3)), [BEST, first]).shape == (3,)
    assert all(factor > 0 for factor in SCALE.values())


@pytest.mark.parametrize("cause", CAUSES)
def test_the_envelope_is_never_narrower_than_the_deviation(cause):
    causes = [BEST, cause, cause, cause]
    element, ratio = matrix_half_widths(EXPANSIONS, causes, 0.0, GRID_DEG)
    matrices = synthesize(EXPANSIONS, GRID_DEG)
    raw = SCALE[cause] * np.abs(matrices - matrices[:1]).max(axis=0)
    assert np.all(element >= raw * (1 - 1e-12))
    # but never above the largest deviation
    assert np.all(element.max(axis=0) <= raw.max(axis=0) * (1 + 1e-12))
    ratios = matrices / matrices[..., :1, :1]
    raw_ratio = SCALE[cause] * np.abs(ratios - ratios[:1]).max(axis=0)
    raw_ratio[:, 0, 0] = 0.0
    assert np.all(ratio >= raw_ratio * (1 - 1e-12))
    relative = raw[:, 0, 0] / matrices[0, :, 0, 0]
    assert np.all(ratio[:, 0, 0] >= relative * (1 - 1e-12))


def test_a_deviation_that_crosses_zero_is_not_small_there_by_merit():
    causes = [BEST, CAUSES[0]]
    element, _ = matrix_half_widths(EXPANSIONS[:2], causes, 0.0, GRID_DEG)
    matrices = synthesize(EXPANSIONS[:2], GRID_DEG)
    raw = SCALE[CAUSES[0]] * np.abs(matrices[1] - matrices[0])[:, 0, 0]
    crossing = np.argmin(raw[20:160]) + 20
    assert raw[crossing] < 0.05 * raw.max()
    # The window is one degree to either side here, where the deviation is three times larger.
    assert element[crossing, 0, 0] > 2.5 * raw[crossing]


def test_half_widths_at_any_angle():
    causes = [BEST, *CAUSES[:3]]
    angles = np.array([0.0, 0.25, 90.5, 179.9, 180.0])
    at = matrix_half_widths(EXPANSIONS, causes, 0.0, angles)
    on_grid = matrix_half_widths(EXPANSIONS, causes, 0.0, GRID_DEG)
    for some, every in zip(at, on_grid, strict=True):
        assert some.shape == (5, 4, 4)
        assert np.all(some >= 0.0)
        np.testing.assert_allclose(some[[0, -1]], every[[0, -1]])
        np.testing.assert_allclose(some[2], (every[90] + every[91]) / 2)


def test_absent_elements_have_no_bar():
    # Elements that symmetry makes zero are zero in all variants, the model's error included.
    causes = [BEST, *CAUSES[:3]]
    for width in matrix_half_widths(EXPANSIONS, causes, 0.05, GRID_DEG):
        assert not width[:, :2, 2:].any() and not width[:, 2:, :2].any()
        assert np.all(width[:, [0, 1, 2, 3], [0, 1, 2, 3]] > 0)


def test_the_model_error_widens_every_bar():
    causes = [BEST, *CAUSES[:3]]
    narrow = matrix_half_widths(EXPANSIONS, causes, 0.0, GRID_DEG)
    wide = matrix_half_widths(EXPANSIONS, causes, 0.05, GRID_DEG)
    for a, b in zip(narrow, wide, strict=True):
        assert np.all(b >= a)
        assert np.all(b[:, 0, 0] > a[:, 0, 0])


def test_the_model_error_of_elements_is_a_share_of_f11():
    element, ratio = matrix_half_widths(EXPANSIONS[:1], [BEST], 0.05, GRID_DEG)
    f11 = synthesize(EXPANSIONS[0], GRID_DEG)[:, 0, 0]
    for i in range(4):
        np.testing.assert_allclose(element[:, i, i], ratio[0, 0, 0] * f11, rtol=1e-12)
        np.testing.assert_allclose(ratio[:, i, i], ratio[0, 0, 0], rtol=1e-12)
    assert ratio[0, 0, 0] > 0


def test_model_error_falls_with_the_cells_and_vanishes_without_contrast():
    assert cell_model_error(1.5, 24) == pytest.approx(cell_model_error(1.5, 12) / 2)
    assert 0 < cell_model_error(1.1, 12) < cell_model_error(1.5, 12) < cell_model_error(2.0, 12)
    assert cell_model_error(1.0, 12) == 0.0
