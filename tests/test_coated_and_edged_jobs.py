"""Solver jobs of coated and edged particles: records, starts and their error bars."""

from dataclasses import replace

import numpy as np
import pytest

from job_kit import job, records_of, spec_of
from oracles.coated import coated_sphere
from scatterloom import jobs
from scatterloom.campaign.case import Case
from scatterloom.scattering import record
from scatterloom.scattering.error_bars import cell_model_error
from scatterloom.scattering.record import CaseRecord, failed_record

SHELL, CORE, FRACTION = 1.33 + 0j, 1.6 + 0.05j, 0.6
COATED = {"kind": "sphere", "core_radius_fraction": FRACTION}
COLUMN = {"kind": "prism", "sides": 6, "height_to_width": 1.0}
LEVELS = (10, 12, 16)


def coated(name, sizes, anchors=()):
    """Jobs of a coated sphere, with digests that know of the core."""
    plain = job(name, COATED, SHELL, sizes, LEVELS, anchors)
    cases = tuple(
        (Case(COATED, SHELL, x, plain.accuracy, inner_indices=(CORE,)).digest, x) for x in sizes
    )
    return replace(plain, cases=cases, inner_indices=(CORE,))


@pytest.fixture(scope="module")
def solved(tmp_path_factory):
    folder = tmp_path_factory.mktemp("campaign")
    anchors = coated("anchors-coated", (1.0, 1.3, 1.6, 1.9))
    span = coated("span-coated", (1.2, 1.5), anchors)
    column = job("anchors-column", COLUMN, 1.31, (1.5,), LEVELS)
    for one in (anchors, span, column):
        jobs.solve(spec_of(one), folder)
    return {one.name: records_of(folder, one) for one in (anchors, span, column)}


def test_coated_spheres_within_their_bars(solved):
    angles = np.arange(0.0, 181.0, 5.0)
    inside = []
    for case in solved["anchors-coated"] + solved["span-coated"]:
        assert case.indices == (SHELL, CORE)
        assert not case.warning_flags & record.FLAGS["energy_balance"][0]
        x = case.size_parameter
        exact = coated_sphere(CORE, SHELL, FRACTION * x, x)
        for name in record.SCALARS:
            value, half_width = case.scalars[name]
            assert value == pytest.approx(getattr(exact, name), abs=1.5 * half_width), name
            inside.append(abs(value - getattr(exact, name)) <= half_width)
        matrix, half_width, _ = case.scattering_matrix(angles)
        expected = exact.scattering_matrix(angles)
        rows, columns = [0, 0, 1, 2, 2, 3], [0, 1, 1, 2, 3, 3]
        deviation = np.abs(matrix - expected)[:, rows, columns]
        inside += list((deviation <= half_width[:, rows, columns] + 1e-12).ravel())
        assert half_width[:, 0, 0].max() < 0.05 * matrix[:, 0, 0].max()
    assert np.mean(inside) > 0.9
    assert {case.start for case in solved["span-coated"]} == {"infill"}


def test_columns_conserve_energy(solved):
    (case,) = solved["anchors-column"]
    assert case.indices == (1.31 + 0j,)
    assert case.status == record.SOLVED
    assert case.scalars["absorption_efficiency"][0] == pytest.approx(0.0, abs=1e-12)
    assert case.scalars["single_scattering_albedo"][0] == pytest.approx(1.0, abs=1e-12)


def test_records_keep_all_indices(solved):
    for case in (solved["anchors-coated"][0], solved["anchors-column"][0]):
        arrays = case.to_arrays()
        assert ("inner_indices" in arrays) == bool(case.inner_indices)
        again = CaseRecord.from_arrays(arrays)
        assert again.indices == case.indices
    failed = failed_record("f" * 20, "{}", (SHELL, CORE), 2.0, (8, 12), 1)
    assert CaseRecord.from_arrays(failed.to_arrays()).indices == (SHELL, CORE)


def test_the_strongest_interface_sets_the_cell_model_error():
    def alone(eps):
        return cell_model_error(eps**0.5, 20)

    assert cell_model_error((1.33, 1.33), 20) == cell_model_error(1.33, 20)
    assert cell_model_error((1.2, 2.4), 20) == pytest.approx(alone(4.0))
    assert cell_model_error((1.8, 1.7), 20) == pytest.approx(alone(1.8**2))
    # side by side both face the medium; without touching they do not face each other
    assert cell_model_error((1.2, 2.4), 20, [(0, -1), (1, -1)]) == pytest.approx(alone(2.4**2))
