"""The report lists what failed or is flagged, with reason and advice, as `status` does."""

from __future__ import annotations

import numpy as np
import pytest

from oracles.tables import mie_table
from scatterloom.figures.failures import LISTED, failures
from scatterloom.figures.make import make_figures
from scatterloom.figures.picture import read_index
from scatterloom.figures.report import report
from scatterloom.scattering.audit_table import audit_table
from scatterloom.scattering.reasons import REASONS, WARNING_ADVICE
from scatterloom.scattering.record import FAILED, FLAGS, INFORMATIVE, SOLVED_WITH_WARNING

ASKED = {"f11_relative": 0.02, "ratio_absolute": 0.02, "efficiency_relative": 0.02}


@pytest.fixture(scope="module")
def table():
    return mie_table(
        radius_um=np.geomspace(0.05, 0.3, 60),
        angles_deg=np.arange(0.0, 181.0, 20.0),
        indices={"dark": 1.55 + 0.05j},
    )


def test_every_flag_has_advice():
    warnings = {name for name, (bit, _) in FLAGS.items() if not bit & INFORMATIVE}
    assert set(WARNING_ADVICE) == warnings


def test_nothing_is_said_of_good_cells(table):
    good = table.copy(deep=True)
    good["warning_flags"][0, 0, 3] = 64 | 256  # informative: no warning
    assert failures(good) == []


def test_cells_are_grouped_by_reason_and_warning(table):
    bad = table.copy(deep=True)
    bad["status"][0, 0, 2], bad["warning_flags"][0, 0, 2] = FAILED, 1 | 128
    bad["status"][0, 1, 5], bad["warning_flags"][0, 1, 5] = FAILED, 1
    bad["status"][0, 1, 6], bad["warning_flags"][0, 1, 6] = 0, 0
    bad["status"][0, 0, :], bad["warning_flags"][0, 0, :] = SOLVED_WITH_WARNING, 2 | 16
    bad["status"][0, 0, 2], bad["warning_flags"][0, 0, 2] = FAILED, 1 | 128
    groups = failures(bad)
    said = [(g["kind"], g["number"], g["flag"], g["count"]) for g in groups]
    assert said == [
        ("failed", 1, "not_converged", 1),
        ("failed", 2, "no_memory", 1),
        ("missing", None, "missing", 1),
        ("warned", None, "accuracy_not_met", 59),
        ("warned", None, "cells_too_coarse", 59),
    ]
    assert groups[1]["advice"] == REASONS[1].advice
    place = {"particle": 0, "wavelength": 0, "size": 2}
    radius, x = (
        bad[name].isel(place, missing_dims="ignore") for name in ("radius_um", "size_parameter")
    )
    assert groups[1]["cells"] == [
        {
            "particle": "dark",
            "wavelength_um": float(bad["wavelength"][0]),
            "radius_um": float(radius),
            "size_parameter": float(x),
        }
    ]
    assert len(groups[3]["cells"]) == LISTED


def test_the_report_says_them(table, tmp_path):
    bad = table.copy(deep=True)
    bad["status"][0, 0, 2], bad["warning_flags"][0, 0, 2] = FAILED, 512
    bad["scattering_matrix"][0, 0, 2] = np.nan
    make_figures(bad, tmp_path)
    page = " ".join(
        report(bad, audit_table(bad, ASKED), tmp_path, read_index(tmp_path, "0" * 64)).split()
    )
    section = page[page.index('<h2 id="failures">') : page.index('<h2 id="audit">')]
    assert "reason 3 (no time)" in section
    assert "1 cell," in section
    assert "raise &#39;solver.case_minutes&#39;" in section
    x = bad["size_parameter"].isel(particle=0, wavelength=0, size=2, missing_dims="ignore")
    assert f"{float(x):.4g}</td>" in section
    assert 'href="#failures"' in page
