"""Tables of oriented particles from solved cases, without solving again."""

from __future__ import annotations

import json

import numpy as np
import pytest

from scatterloom import jobs, open_table
from scatterloom.bulk.oriented_table import Ensemble, build, open_oriented, oriented_of
from scatterloom.cli import main
from scatterloom.errors import IntegrityError
from scatterloom.graph import Graph
from scatterloom.store.assemble import Cases
from scatterloom.store.transitions import read_transitions

CONFIG = """
campaign: shoal
title: Plates that fall level
wavelengths_um: [0.5]
medium: {index: 1.0}
materials: {silt: {n: 1.5, k: 0.01}}
particles:
  - {name: plate, material: silt, shape: {kind: spheroid, equatorial_to_polar: 2.0}}
sizes: {radius_um: {from: 0.05, to: 0.08, count: 5}}
angles_deg: {from: 0, to: 180, step: 10}
accuracy: {f11_relative: 0.05, ratio_absolute: 0.02, efficiency_relative: 0.02}
orientations:
  - name: anyhow
    distribution: {kind: uniform, largest_deg: 180}
    incidence_zenith_deg: [180]
    azimuth_deg: [0, 120]
  - name: level
    particles: [plate]
    distribution: {kind: normal, sd_deg: 5}
    incidence_zenith_deg: [90]
    zenith_deg: [60, 90]
populations:
  - name: mix
    particles: {plate: 1}
    size: {kind: lognormal, radius_um: 0.065, geometric_sd: 1.05}
"""


@pytest.fixture(scope="module")
def solved(tmp_path_factory):
    folder = tmp_path_factory.mktemp("oriented")
    config = folder / "shoal.yaml"
    config.write_text(CONFIG)
    graph = Graph.open(config, folder)
    graph.prepare()
    for name, spec in graph.specs.items():
        assert spec["keep_transitions"], name
        jobs.solve(spec, graph.layout.folder)
    paths = [str(config), "--results", str(folder)]
    assert main(["gather", *paths]) == 0
    assert main(["orient", *paths]) == 0
    return graph, paths


def test_random_axes_are_the_table(solved):
    graph, _ = solved
    table = open_table(graph.layout.table).isel(particle=0, wavelength=0)
    random = oriented_of(graph.layout.oriented / "anyhow.zarr", open_table(graph.layout.table))
    cell = random.isel(particle=0, wavelength=0, incidence=0)
    # Light from overhead: the scattering angle is 180 degrees less the zenith angle, and the
    # meridional plane is that of scattering. Matrices are kept in single precision.
    angle = 180.0 - cell.zenith.values
    share = (table.scattering_efficiency / (4 * np.pi)).values
    for s in range(5):
        f11 = table.scattering_matrix.isel(size=s, row=0, col=0)
        f21 = table.scattering_matrix.isel(size=s, row=1, col=0)
        for k, element in enumerate((f11, f21)):
            expected = np.interp(angle, table.angle.values, element.values) * share[s]
            found = cell.phase_matrix.isel(size=s, azimuth=1, row=k, col=0).values
            np.testing.assert_allclose(found, expected, atol=1e-6 * share[s])
    found = cell.extinction_matrix.values
    expected = table.extinction_efficiency.values
    np.testing.assert_allclose(found[:, 0, 0], expected, rtol=1e-6)
    np.testing.assert_allclose(found[:, 0, 1], 0.0, atol=1e-9)
    # Bars of the same cause; the scattered intensity has that of the efficiency as well.
    both = table.scattering_efficiency_error / table.scattering_efficiency
    width = cell.phase_matrix_error.isel(row=0, col=0, azimuth=0) / cell.phase_matrix.isel(
        row=0, col=0, azimuth=0
    )
    assert np.all(width.values > 0)
    assert np.median(width.values / both.values[:, None]) == pytest.approx(1.0, abs=0.9)


def test_level_plates_take_more_from_level_polarization(solved):
    graph, _ = solved
    level = open_oriented(graph.layout.oriented / "level.zarr").isel(incidence=0)
    # Along the horizon, Q is positive along theta, which is vertical: a plate's polarizability
    # is larger along its face, so that K12 is negative (Bohren & Huffman 1983, section 5.3).
    k = level.extinction_matrix.isel(particle=0, wavelength=0)
    assert np.all(k.isel(row=0, col=1).values < -0.05 * k.isel(row=0, col=0).values)
    mean = level.population_extinction_matrix.isel(population=0, wavelength=0)
    radius = level.radius_um.values[0]
    rough = np.pi * 0.065**2 * np.interp(0.065, radius, k.isel(row=0, col=0).values)
    assert float(mean.isel(row=0, col=0)) == pytest.approx(rough, rel=0.1)
    assert 0.0 < float(level.population_extinction_share_outside[0, 0]) < 0.01


def test_matrices_survive_their_files(solved):
    graph, _ = solved
    for case in graph.grid.cases:
        path = graph.layout.solved_transitions(case.digest)
        stored = read_transitions(path)
        assert stored.digest == case.digest and stored.symmetry == "axial"
        assert stored.variants.causes[0] == "best"
    whole = path.read_bytes()
    for damage in (whole[:-7], whole[:100] + bytes([whole[100] ^ 1]) + whole[101:], b""):
        path.write_bytes(damage)
        with pytest.raises(IntegrityError, match=str(path)):
            read_transitions(path)
    path.write_bytes(whole)


def test_missing_matrices_are_named_and_solved_again(solved):
    graph, paths = solved
    case = graph.grid.cases[1]
    path = graph.layout.solved_transitions(case.digest)
    kept = path.read_bytes()
    path.unlink()
    ensemble = Ensemble(
        graph.campaign.model.orientations[1],
        graph.grid,
        Cases(graph.case_files()),
        graph.layout,
        [],
    )
    with pytest.raises(IntegrityError, match=f"{case.digest}.*missing"):
        build(ensemble)
    # The next run prepares again: the job that lacks them loses its case file.
    graph.prepare()
    (lost,) = [n for n in graph.jobs if not graph.layout.case_file(n).exists()]
    jobs.solve(graph.specs[lost], graph.layout.folder)
    again = read_transitions(path)
    path.write_bytes(kept)
    before = read_transitions(path)
    for one, other in zip(again.variants.sources, before.variants.sources, strict=True):
        # Solved from the same start: the same to rounding.
        scale = np.abs(other.matrix).max()
        np.testing.assert_allclose(one.matrix, other.matrix, atol=1e-4 * scale)
    assert main(["orient", *paths]) == 0
    index = json.loads((graph.layout.oriented / "oriented.json").read_bytes())
    assert index["tables"]["level"]["cells"] == 5


def test_nothing_to_average(tmp_path, capsys):
    config = tmp_path / "shoal.yaml"
    config.write_text(CONFIG.split("orientations:")[0])
    assert main(["orient", str(config), "--results", str(tmp_path)]) == 2
    assert "no orientations to average over" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("[plate]", "[plat]", "particle 'plat' is not defined"),
        ("sd_deg: 5", "sd_deg: 0", "sd_deg is out of range"),
        ("kind: normal", "kind: gaussian", "distribution.kind is not known"),
        ("name: level", "name: anyhow", "orientations name 'anyhow' is given twice"),
        ("[90]\n", "[90, 80]\n", "80"),
    ],
)
def test_orientations_that_cannot_be(tmp_path, capsys, old, new, expected):
    config = tmp_path / "shoal.yaml"
    assert old in CONFIG
    config.write_text(CONFIG.replace(old, new, 1))
    assert main(["check", str(config)]) == 2
    assert expected in capsys.readouterr().err
