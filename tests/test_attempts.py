"""One case: finer lattices until the accuracy asked is met, or a flag."""

from dataclasses import replace

import numpy as np
import pytest

from lattice_kit import SPHERE
from oracles import mie
from scatterloom import attempts
from scatterloom.attempts import Task, solve_case
from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.scattering import record
from scatterloom.scattering.case import Asked

INDEX, SIZE = 1.5 + 0.01j, 2.0
# More than ten cells across can give a sphere of this size.
TIGHT = Asked(0.002, 0.001, 0.002)
NOT_MET = record.FLAGS["accuracy_not_met"][0]


def task(refinements: int, asked: Asked = TIGHT) -> Task:
    return Task(
        "job", "anchors", from_spec(SPHERE), "{}", INDEX, (6, 8, 10), refinements, 1e-4, asked, 1
    )


def solve(one: Task):
    return solve_case(one, "0" * 20, SIZE, [], lambda x, residual: None)


def test_coarse_lattices_alone_are_flagged():
    case, levels = solve(task(0))
    assert case.levels == (6, 8, 10) and len(levels) == 3
    assert case.status == record.SOLVED_WITH_WARNING and case.warning_flags & NOT_MET


def test_refined_until_accurate():
    case, levels = solve(task(4))
    assert case.levels[-1] > 10
    assert case.status == record.SOLVED
    # The fields handed on are those of the lattices that all sizes of the job share.
    assert [len(level.fields.rows[0][0]) for level in levels] == [
        len(level.fields.rows[0][0]) for level in solve(task(0))[1]
    ]
    exact = mie.sphere(INDEX, SIZE)
    value, half_width = case.scalars["extinction_efficiency"]
    assert half_width <= 0.002 * value
    assert value == pytest.approx(exact.extinction_efficiency, abs=half_width)
    angles = np.arange(0.0, 181.0, 5.0)
    matrix, _, _ = case.scattering_matrix(angles)
    f11 = exact.scattering_matrix(angles)[:, 0, 0]
    assert np.sqrt(np.mean((matrix[:, 0, 0] / f11 - 1.0) ** 2)) <= 0.002


def test_what_cannot_be_met_is_flagged_not_hidden():
    case, _ = solve(task(1, Asked(1e-6, 1e-6, 1e-6)))
    assert case.levels[-1] > 10
    assert case.status == record.SOLVED_WITH_WARNING and case.warning_flags & NOT_MET


@pytest.mark.parametrize(("core", "thin"), [(0.5, False), (0.7, True)])
def test_films_thinner_than_two_cells_are_flagged(core, thin):
    # 5 cells from the centre to the surface: the film has 2.5 cells, or 1.5
    coated = replace(
        task(0),
        shape=from_spec({**SPHERE, "core_radius_fraction": core}),
        inner_indices=(1.4 + 0j,),
    )
    case, _ = solve(coated)
    assert bool(case.warning_flags & record.FLAGS["thin_part"][0]) == thin
    assert case.status == record.SOLVED_WITH_WARNING


def test_a_longer_basis_on_finer_lattices_is_for_all_lattices(monkeypatch):
    # The accuracy is missed first, then the truncation of the finer lattices doubted: the
    # fields handed on must have the longer basis as well.
    flags = [NOT_MET, record.FLAGS["truncation"][0], 0]
    original = attempts.combine_levels

    def flagged(*args, **identity):
        return replace(original(*args, **identity), warning_flags=flags.pop(0))

    monkeypatch.setattr(attempts, "combine_levels", flagged)
    case, levels = solve(task(1, Asked(1.0, 1.0, 1.0)))
    assert not flags
    assert case.levels[-1] > 10
    assert case.n_max == effort.n_max((1.0, 1.0, 1.0), SIZE, 1.0) + 3
    assert [level.transition.n_max for level in levels] == [case.n_max] * 3
    assert [level.cells for level in levels] == [
        len(lattice(from_spec(SPHERE), n).cell) for n in (6, 8, 10)
    ]
