"""Measured matrices: reading, comparison in closed form, recovery of known populations."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
import xarray

from oracles.mie import sphere
from oracles.tables import mie_table, publish_table
from scatterloom.bulk.compare import Model, compare, total
from scatterloom.bulk.inverse_problem import node_steps, pose
from scatterloom.bulk.measurement import Measurement, read_measurement
from scatterloom.bulk.retrieval import fit
from scatterloom.bulk.verdict import judge
from scatterloom.campaign.distribution import Gamma, Lognormal
from scatterloom.cli import main
from scatterloom.errors import BadInput

INDICES = {"water": 1.33 + 0.0j, "silt": 1.53 + 0.003j}
ANGLES = np.arange(5.0, 176.0, 5.0)
RATIOS = {"F12/F11": (0, 1), "F33/F11": (2, 2), "F34/F11": (2, 3)}
TRUTH = Gamma(0.35, 0.05)


@pytest.fixture(scope="module")
def table():
    return mie_table(
        np.geomspace(0.06, 1.0, 60),
        (0.532, 1.064),
        np.arange(0.0, 181.0, 2.0),
        INDICES,
        relative_error=1e-4,
    )


def truth(index: complex, wavelength_um: float, distribution) -> np.ndarray:
    """Matrix times mean scattering efficiency by direct integration, not from the table."""
    node, weight = np.polynomial.legendre.leggauss(90)
    low, high = math.log(0.06), math.log(1.0)
    u = low + 0.5 * (high - low) * (1 + node)
    r = np.exp(u)
    balls = [sphere(index, 2 * math.pi * x / wavelength_um) for x in r]
    area = weight * distribution.density(r) * r**2
    w = area / area.sum() * [b.scattering_efficiency for b in balls]
    return np.tensordot(w, [b.scattering_matrix(ANGLES) for b in balls], axes=1)


def measure(parts, wavelengths=(0.532, 1.064), noise=(0.03, 0.01), seed=3, bright=True):
    """Synthetic measurement of (share of area, index, sizes); F11 on a scale of its own."""
    random = np.random.default_rng(seed)
    wave, angle = [], []
    values: dict[str, list] = {name: [] for name in RATIOS}
    errors: dict[str, list] = {name: [] for name in RATIOS}
    if bright:
        values["F11"], errors["F11"] = [], []
    for k, w in enumerate(wavelengths):
        f = sum(share * truth(index, w, size) for share, index, size in parts)
        wave += [w] * ANGLES.size
        angle += list(ANGLES)
        for name, (i, j) in RATIOS.items():
            exact = f[:, i, j] / f[:, 0, 0]
            values[name] += list(exact + noise[1] * random.standard_normal(ANGLES.size))
            errors[name] += [noise[1] or 1e-3] * ANGLES.size
        if bright:
            f11 = 7.0 ** (k + 1) * f[:, 0, 0]
            values["F11"] += list(f11 * (1 + noise[0] * random.standard_normal(ANGLES.size)))
            errors["F11"] += list((noise[0] or 1e-3) * f11)
    return Measurement(
        "synthetic.csv",
        np.array(wave),
        np.array(angle),
        {n: np.array(v) for n, v in values.items()},
        {n: np.array(v) for n, v in errors.items()},
    )


def test_a_known_population_is_recovered_and_its_material_told(table) -> None:
    verdict = judge(table, measure([(1.0, INDICES["silt"], TRUTH)]), list(INDICES), samples=40)
    assert next(iter(verdict.alone)) == "silt"
    assert verdict.best.problem.particles == ("silt",) and verdict.warnings == ()
    assert verdict.best.effective_radius_um == pytest.approx(0.35, rel=0.03)
    assert verdict.best.effective_variance == pytest.approx(0.05, abs=0.015)
    low, high = verdict.interval("effective_radius_um")
    assert 0.0 < high - low < 0.05
    assert verdict.alone["water"].chi_square > 5 * verdict.alone["silt"].chi_square
    # The discrepancy principle: chi-square at the number of data, not far below.
    assert 0.7 < verdict.best.chi_square / verdict.best.count < 1.1
    radius = verdict.best.problem.radius_um
    exact = TRUTH.density(radius) * radius**2
    exact = exact / (exact @ node_steps(radius))
    assert np.abs(verdict.best.area[0] - exact).max() < 0.3 * exact.max()
    assert (verdict.best.area >= 0).all()
    # The scales of F11, a factor of 7 apart, are found.
    one, two = verdict.best.scales
    assert one / two > 1.0


def test_two_particles_at_once(table) -> None:
    parts = [(0.4, INDICES["silt"], TRUTH), (0.6, INDICES["water"], Lognormal(0.2, 0.25))]
    data = measure(parts, noise=(0.02, 0.004))
    verdict = judge(table, data, list(INDICES), samples=30)
    assert verdict.best is verdict.together
    assert verdict.best.problem.particles == ("water", "silt")
    assert verdict.best.shares == pytest.approx([0.6, 0.4], abs=0.05)
    low, high = verdict.interval("shares")
    assert ((high - low) < 0.2).all() and (low < verdict.best.shares).all()
    assert 0.7 < verdict.best.chi_square / verdict.best.count < 1.1
    radius = verdict.best.problem.radius_um
    mean = (
        verdict.best.area @ (node_steps(radius) * radius) / (verdict.best.area @ node_steps(radius))
    )
    expected = [Lognormal(0.2, 0.25).effective_radius_um, 0.35]
    assert mean == pytest.approx(expected, rel=0.12)


def test_ratios_alone_can_be_fitted(table) -> None:
    data = measure([(1.0, INDICES["silt"], TRUTH)], bright=False)
    found = fit(pose(table, data, ["silt"]))
    assert found.effective_radius_um == pytest.approx(0.35, rel=0.06)
    assert all(math.isnan(scale) for scale in found.scales)


def test_without_noise_the_fit_is_close_to_exact(table) -> None:
    data = measure([(1.0, INDICES["silt"], Lognormal(0.25, 0.2))], noise=(0.0, 0.0))
    found = fit(pose(table, data, ["silt"]))
    exact = Lognormal(0.25, 0.2)
    assert found.effective_radius_um == pytest.approx(exact.effective_radius_um, rel=0.01)
    assert found.effective_variance == pytest.approx(exact.effective_variance, abs=0.01)


def test_small_particles_say_nothing_of_size_and_little_of_material() -> None:
    """Rayleigh scattering: one matrix for all sizes and materials that do not absorb."""
    small = mie_table(
        np.geomspace(2e-3, 2e-2, 20), (1.0,), np.arange(0.0, 181.0, 5.0),
        {"water": 1.33 + 0.0j, "glass": 1.5 + 0.0j}, relative_error=1e-4,
    )  # fmt: skip
    f = sphere(1.33, 0.05).scattering_matrix(ANGLES)
    random = np.random.default_rng(2)
    data = Measurement(
        "small.csv",
        np.full(ANGLES.size, 1.0),
        ANGLES,
        {"F11": f[:, 0, 0] * (1 + 0.02 * random.standard_normal(ANGLES.size))},
        {"F11": 0.02 * f[:, 0, 0]},
    )
    verdict = judge(small, data, ["water", "glass"], samples=20)
    assert any("can't tell" in w and "from" in w for w in verdict.warnings)
    assert any("hardly depend on size" in w for w in verdict.warnings)


def test_data_that_nothing_fits_do_not_end_in_nothing(table) -> None:
    """A single resonant sphere: no smooth distribution of the other material comes near."""
    f = sphere(1.53 + 0.003j, 5.0).scattering_matrix(ANGLES)
    data = Measurement(
        "one.csv",
        np.full(ANGLES.size, 0.532),
        ANGLES,
        {"F11": f[:, 0, 0], "F12/F11": f[:, 0, 1] / f[:, 0, 0]},
        {"F11": 0.001 * f[:, 0, 0], "F12/F11": np.full(ANGLES.size, 0.001)},
    )
    found = fit(pose(table, data, ["water"]))
    assert found.chi_square > 10 * found.count and found.area.sum() > 0


def test_particles_that_do_not_fit_are_named(table) -> None:
    wrong = measure([(1.0, 1.8 + 0.3j, TRUTH)], noise=(0.005, 0.002))
    verdict = judge(table, wrong, list(INDICES), samples=10)
    assert any("no population of these particles fits" in w for w in verdict.warnings)


def model_of(f: np.ndarray, width: float = 0.0) -> Model:
    return Model(ANGLES, f, width * np.abs(f), np.full_like(f, width))


def test_residuals_in_closed_form() -> None:
    f = truth(INDICES["water"], 0.532, TRUTH)
    exact = measure([(1.0, INDICES["water"], TRUTH)], (0.532,), noise=(0.0, 0.0))
    residuals = compare(exact, lambda _: model_of(f))
    chi_square, count, probability = total(residuals)
    assert chi_square < 1e-18 and probability == 1.0
    # F11 is not tested where it is normalized.
    assert count == 4 * ANGLES.size - 1
    bright = next(r for r in residuals if r.element == "F11")
    assert 30.0 not in bright.angle_deg
    off = Measurement(
        "off.csv",
        exact.wavelength_um,
        exact.angle_deg,
        {"F33/F11": exact.values["F33/F11"] + 0.02},
        {"F33/F11": np.full(ANGLES.size, 0.01)},
    )
    (r,) = compare(off, lambda _: model_of(f))
    np.testing.assert_allclose(r.pull, 2.0, rtol=1e-9)
    assert r.chi_square == pytest.approx(4.0 * ANGLES.size)
    # Model half widths of 1.96 sigma equal to the measured sigma halve chi-square.
    (r,) = compare(off, lambda _: model_of(f, 1.959964 * 0.01))
    assert r.chi_square == pytest.approx(2.0 * ANGLES.size, rel=1e-6)
    assert r.model_share == pytest.approx(0.5, rel=1e-6)


def test_normalization_error_is_common_to_all_angles() -> None:
    f = truth(INDICES["water"], 0.532, TRUTH)
    data = measure([(1.0, INDICES["water"], TRUTH)], (0.532,), noise=(0.0, 0.0))
    data.errors["F11"][:] = 0.02 * data.values["F11"]
    bright = next(r for r in compare(data, lambda _: model_of(f), 88.0) if r.element == "F11")
    assert 90.0 not in bright.angle_deg and 30.0 in bright.angle_deg
    np.testing.assert_allclose(bright.measured_sd / bright.measured, 0.02 * math.sqrt(2))
    with pytest.raises(BadInput, match="cannot be normalized at 2 degrees"):
        compare(data, lambda _: model_of(f), 2.0)


CSV = """# a comment
angle_deg,wavelength_um,F11,F11_error,-F12/F11,-F12/F11_error,F22_F11,F22_F11_error
10, 0.5, 3.0, 0.1, 0.1, 0.01, 0.9, 0.02  # another
20, 0.5, 2.0, 0.1, , , 0.8, 0.02
"""


def test_csv_is_read(tmp_path) -> None:
    (tmp_path / "m.csv").write_text(CSV)
    m = read_measurement(tmp_path / "m.csv")
    np.testing.assert_array_equal(m.values["F12/F11"], [-0.1, np.nan])
    np.testing.assert_array_equal(m.values["F22/F11"], [0.9, 0.8])
    assert m.wavelengths == [0.5] and set(m.values) == {"F11", "F12/F11", "F22/F11"}


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("10, 0.5", "190, 0.5", "m.csv:3:1: angle_deg is out of range\n  found: '190'"),
        ("3.0, 0.1", "3.0, 0", "m.csv:3:1: F11_error is out of range"),
        ("2.0, 0.1", "two, 0.1", "m.csv:4:1: F11 is not a number\n  found: 'two'"),
        (", , ,", ", 0.1, ,", "m.csv:4:1: F12/F11 has a value or an error but not both"),
        ("20, 0.5", "10, 0.5", "m.csv:4:1: angle 10 at 0.5 um is given twice\n  hint: first given"),
        (",F11_error", ",F11_sd", "m.csv:2:1: column F11 has no errors"),
        ("F22_F11,", "F23_F11,", "m.csv:2:1: unknown column 'F23_F11'"),
        ("angle_deg", "angle", "m.csv:2:1: no column angle_deg"),
        (" 0.9, 0.02", " 0.9", "m.csv:3:1: wrong number of cells\n  found: 7 cells"),
        ("F22_F11,F22_F11_error", "F12/F11,F12/F11_error", "m.csv:2:1: F12/F11 is given twice"),
    ],
)
def test_bad_csv_is_told_by_line(old, new, message, tmp_path) -> None:
    assert old in CSV
    (tmp_path / "m.csv").write_text(CSV.replace(old, new, 1))
    with pytest.raises(BadInput) as caught:
        read_measurement(tmp_path / "m.csv")
    assert message in str(caught.value)


def test_netcdf_is_read_and_means_the_same(tmp_path) -> None:
    data = measure([(1.0, INDICES["water"], TRUTH)])
    shape = (2, ANGLES.size)
    variables = {"angle_deg": ("angle", ANGLES), "wavelength_um": ("w", [0.532, 1.064])}
    for name in data.values:
        plain = name.replace("/", "_")
        variables[plain] = (("w", "angle"), data.values[name].reshape(shape))
        variables[f"{plain}_error"] = (("w", "angle"), data.errors[name].reshape(shape))
    xarray.Dataset(variables).to_netcdf(tmp_path / "m.nc", engine="netcdf4")
    again = read_measurement(tmp_path / "m.nc")
    for w in (0.532, 1.064):
        one, two = data.at(w), again.at(w)
        for name in data.values:
            np.testing.assert_array_equal(one.values[name], two.values[name])
    (tmp_path / "bad.nc").write_text("no netcdf")
    with pytest.raises(BadInput, match="cannot be read as NetCDF"):
        read_measurement(tmp_path / "bad.nc")
    xarray.Dataset({"x": ("a", [1.0])}).to_netcdf(tmp_path / "x.nc", engine="netcdf4")
    with pytest.raises(BadInput, match="holds neither"):
        read_measurement(tmp_path / "x.nc")


CAMPAIGN = """campaign: saltmere
title: Spheres
wavelengths_um: [0.532, 1.064]
materials: {water: {n: 1.33, k: 0}, silt: {n: 1.53, k: 0.003}}
particles:
  - {name: water, material: water, shape: {kind: sphere}}
  - {name: silt, material: silt, shape: {kind: sphere}}
sizes: {radius_um: {from: 0.06, to: 1.0, count: 60}}
angles_deg: {from: 0, to: 180, step: 2}
populations:
  - {name: right, particles: {silt: 1}, size: {kind: gamma, effective_radius_um: 0.35,
     effective_variance: 0.05}}
  - {name: wrong, particles: {water: 1}, size: {kind: gamma, effective_radius_um: 0.35,
     effective_variance: 0.05}}
"""


def test_command_compare(table, tmp_path, capsys) -> None:
    config, results = tmp_path / "c.yaml", tmp_path / "results"
    config.write_text(CAMPAIGN)
    publish_table(results / "saltmere" / "table.zarr", table)
    words = [str(config), "--results", str(results)]
    assert main(["bulk", *words]) == 0
    data = measure([(1.0, INDICES["silt"], TRUTH)])
    names = list(data.values)
    header = ",".join(f"{n},{n}_error" for n in names)
    rows = [
        ",".join(
            [f"{data.angle_deg[i]},{data.wavelength_um[i]}"]
            + [f"{float(data.values[n][i])!r},{float(data.errors[n][i])!r}" for n in names]
        )
        for i in range(data.angle_deg.size)
    ]
    file = tmp_path / "bench 7.csv"
    file.write_text(f"angle_deg,wavelength_um,{header}\n" + "\n".join(rows) + "\n")
    capsys.readouterr()
    code = main(["compare", str(config), str(file), *words[1:], "--fit", "--samples", "12"])
    out, err = capsys.readouterr()
    assert (code, err) == (0, ""), err
    folder = results / "saltmere" / "compare" / "bench-7"
    summary = json.loads((folder / "comparison.json").read_text())
    models = summary["models"]
    assert models["right"]["probability"] > 0.01 > models["wrong"]["probability"]
    assert list(summary["fit"]["particles"]) == ["silt"] and summary["fit"]["warnings"] == []
    assert summary["fit"]["effective_radius_um"] == pytest.approx(0.35, rel=0.05)
    for name in ("measured-bench-7-0.532um", "measured-bench-7-1.064um", "sizes-bench-7"):
        for ending in ("png", "svg", "pdf", "csv"):
            assert (folder / f"{name}.{ending}").stat().st_size > 500
    assert "right: chi-square" in out and "effective radius 0.3" in out
    assert main(["compare", str(config), str(tmp_path / "none.csv"), *words[1:]]) == 2
    file.write_text(file.read_text().replace(",1.064", ",0.7"))
    assert main(["compare", str(config), str(file), *words[1:]]) == 2
    assert "measured at 0.7 um, which the table does not have" in capsys.readouterr().err
