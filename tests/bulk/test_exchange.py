"""Files for radiative transfer: contents, round trip, metadata, damage."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
import xarray
from compliance_checker.runner import CheckSuite, ComplianceChecker

from oracles.mie import sphere
from oracles.tables import mie_table, publish_table
from scatterloom.bulk.build import build
from scatterloom.bulk.bulkfile import open_bulk, write_bulk
from scatterloom.bulk.coefficients import NAMES, evaluate
from scatterloom.bulk.exchange import exchange_dataset
from scatterloom.bulk.exchange_files import INDEX, read_text, write_exchange, write_netcdf
from scatterloom.bulk.population import Population
from scatterloom.campaign.distribution import Gamma, Lognormal
from scatterloom.cli import main
from scatterloom.errors import BadInput, IntegrityError

RADIUS = np.geomspace(0.05, 0.6, 40)
NARROW = Population("narrow", {"clear": 1.0}, Lognormal(0.3, 0.003), densities={"clear": 1.0})
HAZE = Population("haze", {"clear": 1.0, "dark": 1.0}, Gamma(0.2, 0.05))


@pytest.fixture(scope="module")
def bulk(tmp_path_factory):
    table = mie_table(RADIUS, angles_deg=np.arange(0.0, 181.0, 2.0))
    table.attrs |= {
        "Conventions": "CF-1.11, ACDD-1.3",
        "keywords": "light scattering",
        "standard_name_vocabulary": "CF Standard Name Table",
        "creator_name": "The Saltmere demonstration",
        "license": "CC0-1.0",
        "source": "Mie series",
    }
    path = tmp_path_factory.mktemp("campaign") / "bulk.zarr"
    write_bulk(path, build(table, [NARROW, HAZE]), table.attrs)
    return open_bulk(path)


@pytest.fixture(scope="module")
def written(bulk, tmp_path_factory):
    folder = tmp_path_factory.mktemp("exchange")
    dataset = exchange_dataset(bulk, 8)
    return folder, dataset, write_exchange(folder, dataset, bulk)


def test_files_are_there_and_named_in_the_index(written) -> None:
    folder, _, files = written
    assert files[0] == "saltmere.nc" and len(files) == 9
    assert {p.name for p in folder.iterdir()} == {*files, INDEX}
    index = json.loads((folder / INDEX).read_text())
    assert index["files"] == files and index["table_content_digest"] == "0" * 64
    assert 0 < index["largest_truncation_error"] < 1e-5


def test_netcdf_gives_back_the_matrices(written, bulk) -> None:
    folder, *_ = written
    with xarray.open_dataset(folder / "saltmere.nc", engine="netcdf4") as nc:
        for i, w in np.ndindex(2, 2):
            cell = nc.isel(population=i, wavelength=w)
            c = np.stack([cell[n].values for n in NAMES], axis=1)
            matrix = bulk["scattering_matrix"].values[i, w]
            again = evaluate(c, bulk["angle"].values) * (1 + float(cell["normalization_defect"]))
            assert np.abs((again - matrix) / matrix[:, :1, :1]).max() < 1e-5
            g = float(bulk["asymmetry_parameter"].values[i, w])
            bar = float(bulk["asymmetry_parameter_error"].values[i, w])
            assert abs(c[1, 0] / 3 - g) < bar
        assert float(nc["extinction_per_mass"].sel(population="narrow")[0]) > 0
        assert nc["a1"].attrs["ancillary_variables"] == "a1_error last_degree status"
        assert "Bohren & Huffman" in nc.attrs["sign_convention"]


def test_expansion_of_a_narrow_population_is_that_of_one_sphere(written) -> None:
    cell = written[1].isel(population=0, wavelength=0)
    ball = sphere(1.4, 2 * math.pi * 0.3 / 0.55)
    c = np.stack([cell[n].values for n in NAMES], axis=1)
    angles = np.array([3.0, 47.0, 91.0, 155.0, 177.0])
    exact = ball.scattering_matrix(angles)
    # The population is 0.3 % wide and interpolated over steps of 6.6 %.
    assert np.abs(evaluate(c, angles) - exact).max() < 3e-3 * exact[:, 0, 0].max()
    inside = np.abs(c[1, 0] / 3 - ball.asymmetry_parameter)
    assert inside <= float(cell["a1_error"][1]) / 3


def test_text_is_the_same_to_the_last_digit(written) -> None:
    folder, dataset, _ = written
    cell = dataset.sel(population="haze").isel(wavelength=1)
    table = read_text(folder / "haze-1.1um.txt")
    count = int(cell["last_degree"]) + 1
    expected = np.stack([cell[n].values[:count] for n in NAMES], axis=1)
    np.testing.assert_array_equal(table.coefficients, expected)
    assert table.header["population"] == "haze"
    assert float(table.header["wavelength_um"]) == 1.1
    value, sign, half_width, unit = table.header["extinction_cross_section"].split()
    assert float(value) == float(cell["extinction_cross_section"])
    assert (sign, unit) == ("+-", "um2") and float(half_width) > 0
    scaled = read_text(folder / "haze-1.1um-delta-m.txt")
    np.testing.assert_array_equal(
        scaled.coefficients, np.stack([cell[f"{n}_scaled"].values for n in NAMES], axis=1)
    )
    assert scaled.header["delta_m_streams"] == "8" and scaled.degree.size == 8
    assert float(scaled.header["forward_fraction"]) == float(cell["forward_fraction"])
    assert float(dataset["forward_fraction"].sel(population="haze")[0]) > 1e-4
    assert "extinction_per_mass" not in table.header  # densities of haze are not stated


@pytest.mark.parametrize("checker", ["cf:1.11", "acdd:1.3"])
def test_metadata_pass_the_compliance_checker(checker, written, tmp_path) -> None:
    CheckSuite.load_all_available_checkers()
    out = tmp_path / "result.json"
    ComplianceChecker.run_checker(
        str(written[0] / "saltmere.nc"),
        [checker],
        verbose=0,
        criteria="normal",
        output_filename=str(out),
        output_format="json",
    )
    result = json.loads(out.read_text())[checker]
    # CF has no standard names for expansion coefficients and cross sections per particle;
    # the checker asks for one of every variable, and for nothing else that is missing.
    said = {text for check in result["high_priorities"] for text in check["msgs"]}
    assert said <= {"standard_name"}
    if checker.startswith("cf"):
        assert result["scored_points"] == result["possible_points"]


def test_damaged_text_is_refused(written, tmp_path) -> None:
    whole = (written[0] / "haze-1.1um.txt").read_text()
    lines = whole.splitlines(keepends=True)
    for text in (whole[: len(whole) // 2], "".join(lines[:-3] + lines[-2:]), "degree a1\n", ""):
        (tmp_path / "t.txt").write_text(text)
        with pytest.raises(IntegrityError):
            read_text(tmp_path / "t.txt")


def test_files_that_do_not_give_back_the_matrix_are_refused(bulk, tmp_path, monkeypatch) -> None:
    dataset = exchange_dataset(bulk, 8)

    def careless(path, content):
        write_netcdf(path, content.assign(b1=-content["b1"]))

    monkeypatch.setattr("scatterloom.bulk.exchange_files.write_netcdf", careless)
    with pytest.raises(IntegrityError, match=r"saltmere\.nc: the series sums to a matrix"):
        write_exchange(tmp_path, dataset, bulk)
    assert not (tmp_path / INDEX).exists()


def test_angles_that_do_not_cover_the_sphere_are_bad_input(bulk) -> None:
    with pytest.raises(BadInput, match="0 to 180"):
        exchange_dataset(bulk.isel(angle=slice(3, None)), 8)


CAMPAIGN = """campaign: saltmere
title: Spheres
wavelengths_um: [0.55, 1.1]
materials: {water: {n: 1.4, k: 0}, soot: {n: 1.55, k: 0.05}}
particles:
  - {name: clear, material: water, shape: {kind: sphere}}
  - {name: dark, material: soot, shape: {kind: sphere}}
sizes: {radius_um: {from: 0.05, to: 0.6, count: 40}}
angles_deg: {from: 0, to: 180, step: 2}
populations:
  - {name: haze, particles: {clear: 1, dark: 1},
     size: {kind: gamma, effective_radius_um: 0.2, effective_variance: 0.05}}
"""


def test_commands_bulk_and_exchange(tmp_path, capsys) -> None:
    config = tmp_path / "c.yaml"
    config.write_text(CAMPAIGN)
    folder = tmp_path / "results" / "saltmere"
    publish_table(folder / "table.zarr", mie_table(RADIUS, angles_deg=np.arange(0.0, 181.0, 2.0)))
    words = [str(config), "--results", str(tmp_path / "results")]
    assert main(["exchange", *words]) == 4  # no bulk.zarr yet
    assert "run 'scatterloom bulk'" in capsys.readouterr().err
    assert main(["bulk", *words]) == 0
    shown = capsys.readouterr().out
    assert "extinction per volume (1/µm)" in shown and "Ångström" in shown
    assert main(["exchange", *words]) == 0
    out = capsys.readouterr().out
    assert "5 files" in out and "haze at 0.55 um: degree" in out
    (folder / "exchange" / "old-1um.txt").write_text("")
    config.write_text(CAMPAIGN.replace("populations:", "exchange: {streams: 4}\npopulations:"))
    assert main(["exchange", *words]) == 0
    assert not (folder / "exchange" / "old-1um.txt").exists()
    text = (folder / "exchange" / "haze-0.55um-delta-m.txt").read_text()
    assert "# delta_m_streams: 4" in text
    config.write_text(CAMPAIGN.split("populations:")[0])
    assert main(["exchange", *words]) == 2
    assert "add a section 'populations'" in capsys.readouterr().err
