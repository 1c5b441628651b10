"""The page on Python is run block by block, on the results of a campaign of spheres."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from oracles.tables import mie_table, publish_table
from scatterloom.cli import main

PAGE = Path(__file__).parents[1] / "workflow" / "docs" / "python.md"
CAMPAIGN = """campaign: saltmere
title: Spheres
wavelengths_um: [0.532, 1.064]
materials:
  silt: {n: 1.53, k: 0.003, density_g_cm3: 2.65}
  water: {n: 1.33, k: 0, density_g_cm3: 1.0}
particles:
  - {name: silt, material: silt, shape: {kind: sphere}}
  - {name: water, material: water, shape: {kind: sphere}}
  - {name: mud, material: water, shape: {kind: sphere}}
sizes: {radius_um: {from: 0.06, to: 1.0, count: 50}}
angles_deg: {from: 0, to: 180, step: 3}
populations:
  - {name: haze, particles: {silt: 0.7, water: 0.3},
     size: {kind: lognormal, radius_um: 0.2, geometric_sd: 1.35}}
"""


def test_every_block_runs(tmp_path, monkeypatch, capsys) -> None:
    monkeypatch.chdir(tmp_path)
    config = tmp_path / "saltmere.yaml"
    config.write_text(CAMPAIGN)
    table = mie_table(
        np.geomspace(0.06, 1.0, 50),
        (0.532, 1.064),
        np.arange(0.0, 181.0, 3.0),
        {"silt": 1.53 + 0.003j, "water": 1.33 + 0.0j, "mud": 1.43 + 0.003j},
    )
    table.attrs["config"] = CAMPAIGN
    publish_table(tmp_path / "results" / "saltmere" / "table.zarr", table)
    for command in ("bulk", "exchange"):
        assert main([command, str(config), "--results", "results"]) == 0
    part = table.isel(particle=0, wavelength=0, size=24)
    f = part["scattering_matrix"].values[2:59]
    rows = [
        f"{angle},0.532,{g[0, 0]:.6g},{0.03 * g[0, 0]:.3g},{-g[0, 1] / g[0, 0]:.6g},0.01"
        for angle, g in zip(table["angle"].values[2:59], f, strict=True)
    ]
    header = "angle_deg,wavelength_um,F11,F11_error,-F12/F11,-F12/F11_error"
    Path("bench.csv").write_text("\n".join([header, *rows]) + "\n")
    capsys.readouterr()
    blocks = re.findall(r"^```python\n(.*?)^```", PAGE.read_text(), re.M | re.S)
    assert len(blocks) >= 8
    names: dict[str, object] = {}
    for number, block in enumerate(blocks):
        exec(compile(block, f"python.md, block {number}", "exec"), names)
    out = capsys.readouterr().out
    assert "Qext = " in out and "lies outside the table" in out and "lidar ratio" in out
    radius = float(part["radius_um"])
    verdict = names["verdict"]
    assert verdict.best.effective_radius_um == pytest.approx(radius, rel=0.15)  # type: ignore[attr-defined]
