"""The parts of the error budget of F11."""

import numpy as np
import pytest

from scatterloom.scattering import error_bars
from scatterloom.scattering.error_bars import BEST, CURVATURE, REMAINDER, SCALE, SOLVER, TRUNCATION


def isotropic(values):
    """Expansions of matrices with the same F11 at every angle."""
    out = np.zeros((len(values), 3, 4, 4))
    out[:, 0, 0, 0] = values
    return out


def test_parts_of_constant_deviations():
    expansion = isotropic([1.0, 1.01, 1.002, 0.999, 1.0005])
    causes = (BEST, REMAINDER, CURVATURE, SOLVER, TRUNCATION)
    parts = error_bars.f11_budget(expansion, causes, 0.003)
    expected = np.hypot(np.hypot(SCALE[REMAINDER] * 0.01, SCALE[CURVATURE] * 0.002), 0.003)
    assert parts["discretization"] == pytest.approx(expected)
    assert parts["solver"] == pytest.approx(SCALE[SOLVER] * 0.001)
    assert parts["truncation"] == pytest.approx(SCALE[TRUNCATION] * 0.0005)
    assert parts["extrapolation_disagreement"] == pytest.approx(0.2)


def test_parts_make_up_the_half_width():
    """Of isotropic matrices the running maximum over angle changes nothing."""
    expansion = isotropic([1.0, 0.98, 1.004, 1.002])
    causes = (BEST, REMAINDER, SOLVER, TRUNCATION)
    parts = error_bars.f11_budget(expansion, causes, 0.001)
    _, ratio = error_bars.matrix_half_widths(expansion, causes, 0.001, np.array([30.0, 90.0]))
    whole = np.sqrt(sum(parts[name] ** 2 for name in error_bars.BUDGET))
    np.testing.assert_allclose(ratio[:, 0, 0], whole, rtol=1e-12)


def test_a_single_level_has_no_fits_to_compare():
    parts = error_bars.f11_budget(isotropic([1.0]), (BEST,), 0.002)
    assert parts == {
        "discretization": 0.002,
        "solver": 0.0,
        "truncation": 0.0,
        "extrapolation_disagreement": 0.0,
    }
