"""From levels to the record of a case: best estimate, bars, flags, files."""

from dataclasses import replace

import numpy as np
import pytest

from level_kit import ASKED, disturbed, level, record_of
from oracles import axial, mie
from scatterloom.scattering import record
from scatterloom.scattering.case import Asked, meets
from scatterloom.store.casefile import read_records, write_records
from scatterloom.transition.matrix import efficiencies
from transition_kit import exact_axial, exact_sphere, exact_spheroid

CELLS = (12, 16, 24)
INDEX, X = 1.5 + 0.01j, 2.0
ANGLES = np.arange(0.0, 181.0, 5.0)


def flags_of(case):
    return {name for name, (bit, _) in record.FLAGS.items() if case.warning_flags & bit}


def levels_of(exact, x=X, square=0.02, cube=0.0, **changes):
    return [level(disturbed(exact, n, square, cube), x, **changes) for n in CELLS]


@pytest.fixture(scope="module")
def exact():
    return exact_sphere(INDEX, X, 9)


@pytest.fixture(scope="module")
def good(exact):
    return record_of(levels_of(exact), CELLS, "sphere", INDEX, X)


def test_errors_in_d2_are_taken_away(good):
    ball = mie.sphere(INDEX, X)
    matrix, half_width, ratio = good.scattering_matrix(ANGLES)
    expected = ball.scattering_matrix(ANGLES)
    # truncation of the matrix at degree 9 for x = 2: 1e-8
    np.testing.assert_allclose(matrix, expected, atol=1e-6)
    values = {name: good.scalars[name][0] for name in record.SCALARS}
    for name in record.SCALARS:
        # absorption is extrapolated by itself and is not linear in T: second order in 0.02
        tolerance = 2e-3 if name == "absorption_efficiency" else 1e-4
        assert values[name] == pytest.approx(getattr(ball, name), rel=tolerance)
    assert good.status == record.SOLVED
    assert not flags_of(good)
    assert meets(good, ASKED)
    assert np.all(half_width >= 0) and np.all(ratio >= 0)
    assert half_width.shape == ratio.shape == (len(ANGLES), 4, 4)


def test_identity_and_bookkeeping(good, exact):
    assert (good.digest, good.start, good.wall_seconds) == ("0" * 20, "cold", 0.5)
    assert good.levels == CELLS
    assert good.n_max == 9 and good.wave_count == 2 * 9 * 11
    assert good.products == 4.0
    assert good.operator_error == 1e-6
    assert good.lattice_cells == 1000 and good.memory_bytes == 10_000
    assert len(good.variants) == len(good.causes) == len(good.expansion)
    assert good.causes[0] == "best" and good.causes.count("best") == 1
    scattering = good.scalars["scattering_efficiency"][0]
    assert good.checks["integrated_scattering_efficiency"] == pytest.approx(scattering, rel=1e-10)
    assert good.checks["lattice_asymmetry"] == 1e-4


@pytest.mark.parametrize("square", [0.02, 0.1])
@pytest.mark.parametrize("cube", [0.0, -0.5, 0.5])
def test_bars_cover_errors_of_another_law(exact, square, cube):
    # A cubic part that the best fit does not know of, half of the square one at 8 cells: the
    # bars, 95 % ones, must hold nine tenths of all elements and angles.
    levels = levels_of(exact, square=square, cube=cube * square)
    case = record_of(levels, CELLS, "sphere", INDEX, X)
    matrix, half_width, ratio = case.scattering_matrix(ANGLES)
    expected = mie.sphere(INDEX, X).scattering_matrix(ANGLES)
    present = np.abs(expected) > 0
    assert np.mean((np.abs(matrix - expected) <= half_width)[present]) >= 0.9
    difference = matrix / matrix[:, :1, :1] - expected / expected[:, :1, :1]
    assert np.mean((np.abs(difference) <= ratio)[present]) >= 0.9
    for name in ("extinction_efficiency", "scattering_efficiency"):
        value, width = case.scalars[name]
        assert abs(value - getattr(mie.sphere(INDEX, X), name)) <= width


def test_spheroid_of_exact_levels():
    average = axial.random_orientation(exact_axial(2.0, INDEX, 1.5))
    exact = exact_spheroid(2.0, INDEX, 1.5, 10)
    case = record_of([level(exact, 1.5) for _ in CELLS], CELLS, "axial", INDEX, 1.5)
    matrix, _, _ = case.scattering_matrix(ANGLES)
    np.testing.assert_allclose(matrix, average.scattering_matrix(ANGLES), atol=1e-7)
    for name in record.SCALARS:
        assert case.scalars[name][0] == pytest.approx(getattr(average, name), rel=1e-6)


@pytest.mark.parametrize("count", [1, 2])
def test_fewer_levels(exact, count):
    cells = CELLS[:count]
    levels = [level(disturbed(exact, n, 0.02), X) for n in cells]
    case = record_of(levels, cells, "sphere", INDEX, X)
    assert case.levels == cells
    expected = exact if count == 2 else levels[0].transition
    assert case.scalars["extinction_efficiency"][0] == pytest.approx(
        efficiencies(expected, X)[0], rel=1e-9
    )


FLAGGED = {
    "not_converged": {"converged": False},
    "arithmetic_cells": {"arithmetic": True},
    "start_dropped": {"dropped": True},
    "energy_balance": {"absorption": 0.5},
}


@pytest.mark.parametrize("flag", FLAGGED)
def test_what_a_level_reports_is_flagged(exact, flag):
    levels = levels_of(exact)
    levels[1] = levels_of(exact, **FLAGGED[flag])[1]
    if flag == "energy_balance":
        levels = levels_of(exact, **FLAGGED[flag])
    case = record_of(levels, CELLS, "sphere", INDEX, X)
    assert flag in flags_of(case)
    if flag == "start_dropped":
        # the result is as good as any
        assert flags_of(case) == {flag}
        assert case.status == record.SOLVED
    else:
        assert case.status == record.SOLVED_WITH_WARNING


@pytest.mark.parametrize(
    "asked",
    [
        replace(ASKED, f11_relative=1e-9),
        replace(ASKED, ratio_absolute=1e-9),
        replace(ASKED, efficiency_relative=1e-9),
    ],
    ids=["f11", "ratio", "efficiency"],
)
def test_accuracy_beyond_the_bars_is_flagged(exact, asked):
    case = record_of(levels_of(exact), CELLS, "sphere", INDEX, X, asked)
    assert "accuracy_not_met" in flags_of(case)
    assert not meets(case, asked)
    assert case.status == record.SOLVED_WITH_WARNING


def test_coarse_cells_are_flagged(exact):
    # ten cells per wavelength inside: d k |m| = 2 pi / 10
    limit = 2 * np.pi / 10 / (X * abs(INDEX))
    for spacing, flagged in ((0.99 * limit, False), (1.01 * limit, True)):
        case = record_of(levels_of(exact), CELLS, "sphere", INDEX, X, spacing=spacing)
        assert ("cells_too_coarse" in flags_of(case)) == flagged


def test_a_short_basis_is_flagged():
    # Degree 3 carries some per cent of the scattering of a sphere of x = 3.
    short = exact_sphere(INDEX, 3.0, 3)
    case = record_of(levels_of(short, 3.0), CELLS, "sphere", INDEX, 3.0)
    assert "truncation" in flags_of(case)
    assert case.checks["truncation_share"] > 0.01
    single = record_of(levels_of(exact_sphere(INDEX, 0.5, 1), 0.5), CELLS, "sphere", INDEX, 0.5)
    # nothing to compare with: not confirmed
    assert "truncation" in flags_of(single)


def test_widths_grow_with_what_went_wrong(exact, good):
    worse = {
        "fit": levels_of(exact, square=0.02, cube=0.05),
        "solver": levels_of(exact, solver_error=5e-3),
    }
    for levels in worse.values():
        case = record_of(levels, CELLS, "sphere", INDEX, X)
        for name in ("extinction_efficiency", "scattering_efficiency"):
            assert case.scalars[name][1] > good.scalars[name][1]
        _, wide, _ = case.scattering_matrix(ANGLES)
        _, narrow, _ = good.scattering_matrix(ANGLES)
        assert wide[:, 0, 0].mean() > narrow[:, 0, 0].mean()
    loose = record_of(levels_of(exact, residual=0.05), CELLS, "sphere", INDEX, X)
    # absorption is of first order in the fields
    assert loose.scalars["absorption_efficiency"][1] > good.scalars["absorption_efficiency"][1]


def same(one, other):
    for name in one.__dataclass_fields__.keys() - {"transitions"}:  # kept in files of their own
        a, b = getattr(one, name), getattr(other, name)
        if isinstance(a, np.ndarray):
            np.testing.assert_array_equal(a, b)
        elif isinstance(a, dict):
            assert a.keys() == b.keys()
            np.testing.assert_array_equal(list(a.values()), [b[key] for key in a])
        elif isinstance(a, float):
            np.testing.assert_array_equal(a, b)
        else:
            assert a == b and type(a) is type(b)


def test_records_survive_a_case_file(tmp_path, good):
    failed = record.failed_record("f" * 20, "{}", 1.5 + 0j, 2.0, (8, 12), 129)
    path = tmp_path / "some.case"
    write_records(path, [good, failed])
    again = read_records(path)
    assert len(again) == 2
    same(good, again[0])
    same(failed, again[1])
    before, after = (case.scattering_matrix(ANGLES) for case in (good, again[0]))
    for a, b in zip(before, after, strict=True):
        np.testing.assert_array_equal(a, b)


def test_a_failed_case_has_no_numbers():
    failed = record.failed_record("f" * 20, "{}", 1.5 + 0j, 2.0, (8, 12), 1)
    assert failed.status == record.FAILED
    assert flags_of(failed) == {"not_converged"}
    assert all(np.isnan(v) for pair in failed.scalars.values() for v in pair)
    for part in failed.scattering_matrix(ANGLES):
        assert part.shape == (len(ANGLES), 4, 4)
        # no element may pass for a number: not even those that symmetry makes zero
        assert np.isnan(part[:, 0, 0]).all()


def test_flags_are_distinct_bits():
    bits = [bit for bit, _ in record.FLAGS.values()]
    assert sum(bits) == 2 ** len(bits) - 1
    assert record.FLAGS["start_dropped"][0] & record.INFORMATIVE


def test_asked_is_what_meets_compares(good):
    wide = Asked(1.0, 1.0, 1.0)
    assert meets(good, wide)
