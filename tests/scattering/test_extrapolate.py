"""Fits over the lattice levels: exact for the laws they assume."""

import numpy as np
import pytest

from level_kit import disturbed
from scatterloom.scattering.error_bars import BEST, SCALE
from scatterloom.scattering.extrapolate import combine, fits
from transition_kit import distance, exact_sphere


@pytest.mark.parametrize("cells", [(8, 12), (8, 12, 16), (12, 18, 24), (6, 10, 14, 20)])
def test_best_fit_is_exact_for_errors_in_d2(cells):
    best, *rivals = fits(cells)
    spacing = 1.0 / np.array(cells)
    for a0, a2 in ((1.0, 0.0), (0.7, -3.0), (2.0 - 1.0j, 0.4j)):
        assert best.weights @ (a0 + a2 * spacing**2) == pytest.approx(a0, rel=1e-12)
    assert best.cause == BEST
    assert rivals
    for rival in rivals:
        # every rival keeps what does not depend on the spacing
        assert rival.weights.sum() == pytest.approx(1.0, rel=1e-12)
        assert rival.cause in SCALE
        assert np.abs(rival.weights - best.weights).max() > 1e-3


@pytest.mark.parametrize("cells", [(8, 12, 16), (12, 18, 24), (6, 10, 14, 20)])
def test_some_rival_is_exact_where_there_is_a_cubic_part(cells):
    spacing = 1.0 / np.array(cells)
    values = 0.7 - 3.0 * spacing**2 + 5.0 * spacing**3
    found = [fit.weights @ values for fit in fits(cells)]
    assert min(abs(value - 0.7) for value in found[1:]) < 1e-12
    assert abs(found[0] - 0.7) > 1e-4


def test_one_level_is_taken_as_it_is():
    (only,) = fits((12,))
    assert only.weights == [1.0]
    assert only.cause == BEST


@pytest.mark.parametrize("cells", [(), (12, 8), (8, 8)])
def test_levels_must_ascend(cells):
    with pytest.raises(ValueError, match="must ascend"):
        fits(cells)


def test_matrices_are_combined_with_the_weights():
    exact = exact_sphere(1.5 + 0.01j, 2.0, 5)
    cells = (8, 12, 16)
    levels = [disturbed(exact, n, square=0.05) for n in cells]
    assert distance(levels[-1], exact) > 5e-3
    assert distance(combine(levels, fits(cells)[0]), exact) < 1e-14
    with pytest.raises(ValueError):
        combine(levels[:2], fits(cells)[0])
