"""The audit of a whole table: counts, places, and the command's screen and exit code."""

from __future__ import annotations

import json

import numpy as np
import pytest

from oracles.tables import mie_table, publish_table
from scatterloom.cli import main
from scatterloom.commands.audit import summary
from scatterloom.errors import IntegrityError
from scatterloom.scattering.audit import CHECKS
from scatterloom.scattering.audit_table import audit_table, read_audit

ASKED = {"f11_relative": 0.02, "ratio_absolute": 0.03, "efficiency_relative": 0.015}
CONFIG = """\
campaign: saltmere
title: Spheres from a closed form
wavelengths_um: [0.55, 1.1]
materials:
  clear: {n: 1.4, k: 0.0}
  dark: {n: 1.55, k: 0.05}
particles:
  - {name: clear, material: clear, shape: {kind: sphere}}
  - {name: dark, material: dark, shape: {kind: sphere}}
sizes: {radius_um: [0.05, 0.08, 0.12, 0.2, 0.3, 0.4]}
angles_deg: {from: 0, to: 180, step: 6}
accuracy: {f11_relative: 0.02, ratio_absolute: 0.03, efficiency_relative: 0.015}
populations:
  - {name: haze, particles: {clear: 3, dark: 1},
     size: {kind: lognormal, radius_um: 0.12, geometric_sd: 1.2}}
"""


@pytest.fixture(scope="module")
def table():
    return mie_table(
        radius_um=np.array([0.05, 0.08, 0.12, 0.2, 0.3, 0.4]),
        angles_deg=np.arange(0.0, 181.0, 6.0),
    )


def named(result, name: str) -> dict:
    return next(row for row in result["checks"] if row["name"] == name)


def test_exact_spheres_pass(table) -> None:
    result = audit_table(table, ASKED)
    assert result["passed"]
    assert result["cells"] == {"missing": 0, "solved": 24, "solved_with_warning": 0, "failed": 0}
    assert [row["name"] for row in result["checks"]] == [check.name for check in CHECKS]
    for row in result["checks"]:
        assert row["flagged"] == 0
        assert row["judged"] == (12 if row["name"] == "lossless" else 24)
        assert row["not_judged"] == 0
    accuracy = {row["name"]: row for row in result["accuracy"]}
    assert accuracy["efficiency_relative"]["worst"] == pytest.approx(0.01, rel=1e-4)
    assert accuracy["efficiency_relative"]["above"] == 0
    assert accuracy["f11_relative"]["worst"] == pytest.approx(0.0101, rel=1e-4)
    assert accuracy["f11_relative"]["above"] == 0
    assert result["short"] == 0
    json.dumps(result, allow_nan=False)


def test_accuracy_of_matrices_is_a_root_mean_square_over_angle(table) -> None:
    uneven = table.copy(deep=True)
    half_width = uneven["scattering_matrix_ratio_error"]
    half_width[:] = 0.0
    # sin^2 has the mean 1/2 over 0 to 180 degrees, the mean of its square is 3/8.
    sine = np.sin(np.deg2rad(uneven["angle"].values))
    half_width[0, 0, 2, :, 0, 0] = 0.02 * sine
    half_width[1, 1, 4, :, 2, 3] = 0.04 * sine**2
    accuracy = {row["name"]: row for row in audit_table(uneven, ASKED)["accuracy"]}
    assert accuracy["f11_relative"]["worst"] == pytest.approx(0.02 / np.sqrt(2), rel=1e-5)
    assert accuracy["f11_relative"]["worst_case"]["particle"] == "clear"
    assert accuracy["ratio_absolute"]["worst"] == pytest.approx(0.04 * np.sqrt(3 / 8), rel=1e-5)
    assert accuracy["ratio_absolute"]["worst_case"]["particle"] == "dark"
    # The largest half width, 0.04, is above what is asked; the root mean square is not.
    assert accuracy["ratio_absolute"]["above"] == 0


def test_wide_half_widths_fail_the_audit_and_are_counted_once(table) -> None:
    wide = table.copy(deep=True)
    for size in (1, 2):
        wide["scattering_matrix_ratio_error"][0, 1, size, :, 0, 0] = 0.03
    wide["extinction_efficiency_error"][0, 1, 2] = 1.0
    wide["status"][0, 1, 1] = 2  # the solver has said so already
    result = audit_table(wide, ASKED)
    accuracy = {row["name"]: row["above"] for row in result["accuracy"]}
    assert accuracy == {"f11_relative": 2, "ratio_absolute": 0, "efficiency_relative": 1}
    assert result["short"] == 1
    assert result["flagged"] == 0 and not result["passed"]
    text = "\n".join(summary(result))
    assert "1 cases solved with a warning, 1 others with wider half widths than asked" in text


def test_a_violation_is_counted_and_placed(table) -> None:
    bad = table.copy(deep=True)
    bad["scattering_efficiency"][1, 0, 3] *= 1.1
    bad["status"][0, 0, 0] = 3
    for name in ("scattering_matrix", "scattering_matrix_error", "extinction_efficiency"):
        bad[name][0, 0, 0] = np.nan
    result = audit_table(bad, ASKED)
    assert not result["passed"]
    row = named(result, "energy_balance")
    assert row["flagged"] == 1 and row["judged"] == 23
    assert row["worst_case"]["particle"] == "dark"
    assert row["worst_case"]["wavelength_um"] == 0.55
    assert row["worst_case"]["size_parameter"] == pytest.approx(2 * np.pi * 0.2 / 0.55, rel=1e-4)
    assert named(result, "eigenvalues")["flagged"] == 0
    assert result["cells"]["failed"] == 1


def test_a_grid_without_the_ends_is_not_judged_there() -> None:
    part = mie_table(
        radius_um=np.array([0.1, 0.2]), angles_deg=np.array([20.0, 60.0, 100.0, 160.0])
    )
    result = audit_table(part, ASKED)
    row = named(result, "backward_f44")
    assert row["judged"] == 0 and row["not_judged"] == 8 and row["worst"] is None


@pytest.fixture
def campaign(table, tmp_path):
    config = tmp_path / "saltmere.yaml"
    config.write_text(CONFIG)
    publish_table(tmp_path / "results" / "saltmere" / "table.zarr", table)
    return config, tmp_path / "results"


def test_command_writes_json_and_one_screen(campaign, capsys) -> None:
    config, results = campaign
    assert main(["audit", str(config), "--results", str(results)]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    lines = out.splitlines()
    assert len(lines) <= 24 and max(len(line) for line in lines) <= 110
    assert "all checks passed" in out
    result = read_audit(results / "saltmere" / "audit.json", "0" * 64)
    assert result["passed"]
    with pytest.raises(IntegrityError, match="another table"):
        read_audit(results / "saltmere" / "audit.json", "1" * 64)


def test_command_says_what_is_wrong_and_returns_1(table, tmp_path, capsys) -> None:
    bad = table.copy(deep=True)
    bad["scattering_matrix"][0, 1, 2, 0, 0, 1] = 0.7
    bad["scattering_matrix"][0, 1, 2, 0, 1, 0] = 0.7
    (tmp_path / "saltmere.yaml").write_text(CONFIG)
    publish_table(tmp_path / "saltmere" / "table.zarr", bad)
    code = main(["audit", str(tmp_path / "saltmere.yaml"), "--results", str(tmp_path)])
    out = capsys.readouterr().out
    assert code == 1
    assert "F12 = 0 at 0 deg" in out
    assert "at clear, 1.1 um, size parameter 0.6854" in out
    assert "not passed:" in out


def test_commands_without_a_table_end_with_integrity(tmp_path, capsys) -> None:
    (tmp_path / "saltmere.yaml").write_text(CONFIG)
    for command in ("audit", "bulk", "figures", "report"):
        code = main([command, str(tmp_path / "saltmere.yaml"), "--results", str(tmp_path)])
        assert code == 4
        err = capsys.readouterr().err
        assert "table.zarr" in err and "Traceback" not in err


def test_the_whole_chain_of_commands(table, tmp_path, capsys) -> None:
    config, results = tmp_path / "saltmere.yaml", tmp_path / "results"
    folder = results / "saltmere"
    config.write_text(CONFIG)
    publish_table(folder / "table.zarr", table.isel(wavelength=[0]))  # fewer figures to draw
    options = [str(config), "--results", str(results)]
    # Figures and report want the bulk properties that the campaign asks for.
    assert main(["figures", *options]) == 4
    assert "scatterloom bulk" in capsys.readouterr().err
    assert main(["bulk", *options]) == 1  # six sizes only: flagged as coarse
    assert "coarse size grid" in capsys.readouterr().out
    assert main(["report", *options]) == 4
    assert "audit.json" in capsys.readouterr().err
    assert main(["audit", *options]) == 0
    assert main(["figures", *options]) == 0
    assert main(["report", *options]) == 0
    page = (folder / "report.html").read_text()
    assert "haze" in page and "coarse size grid" in page
    assert (folder / "figures" / "population-haze.svg").is_file()
    config.write_text(CONFIG.replace("name: haze", "name: mist"))
    assert main(["report", *options]) == 4
    assert "other populations" in capsys.readouterr().err


def test_bulk_without_populations_is_bad_input(campaign, capsys) -> None:
    config, results = campaign
    config.write_text(CONFIG[: CONFIG.index("populations:")])
    assert main(["bulk", str(config), "--results", str(results)]) == 2
    assert "populations" in capsys.readouterr().err


def test_an_absorbing_core_is_absorption(table) -> None:
    """A coating may be clear: a particle is lossless only if its core is, too."""
    coated = table.copy(deep=True)
    clear = coated["refractive_index_k"].values == 0.0
    coated["core_refractive_index_k"].values[clear] = 0.1
    assert named(audit_table(coated, ASKED), "lossless")["judged"] == 0
