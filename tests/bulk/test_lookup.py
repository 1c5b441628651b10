"""Values between the nodes of a table, against the Mie series there."""

from __future__ import annotations

import math

import numpy as np
import pytest

import scatterloom
from oracles.mie import sphere
from oracles.tables import mie_table, publish_table
from scatterloom.bulk.blending import blend, left_out_error
from scatterloom.bulk.lookup import Table
from scatterloom.errors import BadInput

CONFIG = """campaign: between
particles:
  - {name: a, shape: {kind: sphere}}
  - {name: b, shape: {kind: sphere}}
  - {name: c, shape: {kind: sphere}}
  - {name: d, shape: {kind: sphere}}
"""
INDICES = {"a": 1.40 + 0.01j, "b": 1.44 + 0.01j, "c": 1.48 + 0.01j, "d": 1.42 + 0.03j}
QUANTITIES = (
    "extinction_efficiency",
    "scattering_efficiency",
    "asymmetry_parameter",
    "single_scattering_albedo",
)


def spheres(**changes):
    keywords = {
        "radius_um": np.geomspace(0.05, 0.6, 50),
        "angles_deg": np.arange(0.0, 181.0, 10.0),
        "wavelength_um": (0.55, 0.8),
        "indices": INDICES,
        "relative_error": 1e-9,
    }
    dataset = mie_table(**(keywords | changes))
    dataset.attrs["config"] = CONFIG
    # The table's own errors: nothing, to test the interpolation's alone.
    for name in dataset.data_vars:
        if str(name).endswith("_error"):
            dataset[name].values[:] = 0.0
    return dataset


@pytest.fixture(scope="module")
def table():
    return Table(spheres())


def test_a_node_is_given_back(table) -> None:
    radius = float(table.dataset["radius_um"][0, 20])
    optics = table.at("b", radius_um=radius, wavelength_um=0.55)
    cell = table.dataset.isel(particle=1, wavelength=0, size=20)
    assert optics.extinction_efficiency.value == pytest.approx(
        float(cell["extinction_efficiency"]), rel=1e-12
    )
    assert optics.extinction_efficiency.interpolation_error < 1e-12
    np.testing.assert_allclose(optics.scattering_matrix.value, cell["scattering_matrix"], rtol=1e-9)
    assert optics.index == 1.44 + 0.01j


def test_sizes_between_nodes_lie_within_the_estimate(table) -> None:
    """Of 60 sizes drawn at random, the estimate covers the error in 95 of 100 values."""
    inside, total = 0, 0
    worst = 0.0
    for x in np.random.default_rng(5).uniform(0.6, 4.5, 60):
        optics = table.at("a", size_parameter=x)
        ball = sphere(INDICES["a"], x)
        for name in QUANTITIES:
            found, exact = getattr(optics, name), getattr(ball, name)
            assert found.error == found.interpolation_error  # the table's own bars are zero
            inside += abs(found.value - exact) <= found.interpolation_error
            worst = max(worst, abs(found.value - exact))
            total += 1
        f, exact = optics.scattering_matrix, ball.scattering_matrix(table.angle_deg)
        there = exact != 0.0
        inside += int(np.sum((np.abs(f.value - exact) <= f.interpolation_error)[there]))
        total += int(there.sum())
        assert f.interpolation_error[:, 0, 0].max() < 0.05 * exact[:, 0, 0].max()
        mean = np.trapezoid(f.value[:, 0, 0], -np.cos(np.deg2rad(table.angle_deg))) / 2
        assert mean == pytest.approx(1.0, abs=0.06)  # trapezium rule on 10 degrees
    assert inside / total > 0.95
    assert worst < 4e-3  # of efficiencies up to 3: sizes in a ratio of 1.05


def test_indices_on_a_line_and_in_the_plane(table) -> None:
    for index in (1.41 + 0.01j, 1.46 + 0.01j, 1.43 + 0.015j, 1.41 + 0.012j):
        optics = table.at("a", size_parameter=2.0, index=index)
        ball = sphere(index, 2.0)
        for name in QUANTITIES:
            found = getattr(optics, name)
            assert abs(found.value - getattr(ball, name)) <= found.interpolation_error, name
        apart = np.abs(optics.scattering_matrix.value - ball.scattering_matrix(table.angle_deg))
        f11 = optics.scattering_matrix.value[:, :1, :1]
        assert np.all(apart <= optics.scattering_matrix.interpolation_error + 1e-4 * f11)


def test_two_ladders_only_state_half_their_spread() -> None:
    two = {"a": 1.40 + 0.01j, "b": 1.44 + 0.01j}
    table = Table(spheres(indices=two))
    optics = table.at("a", size_parameter=1.5, index=1.42 + 0.01j)
    q = [sphere(m, 1.5).extinction_efficiency for m in two.values()]
    assert optics.extinction_efficiency.interpolation_error == pytest.approx(
        0.5 * abs(q[1] - q[0]), rel=0.01
    )
    exact = sphere(1.42 + 0.01j, 1.5).extinction_efficiency
    assert abs(optics.extinction_efficiency.value - exact) < 0.1 * abs(q[1] - q[0])


def test_a_wavelength_between_nodes_takes_the_index_between() -> None:
    dataset = spheres(indices={"a": 1.4 + 0.01j}, wavelength_um=(0.5, 0.7, 1.0))
    other = [spheres(indices={"a": m + 0j}, wavelength_um=(0.5, 0.7, 1.0)) for m in (1.39, 1.37)]
    for w, source in ((1, other[0]), (2, other[1])):  # a dispersive material
        for name in dataset.data_vars:
            if "wavelength" in dataset[name].dims:
                dataset[name].values[:, w] = source[name].values[:, w]
    table = Table(dataset)
    at = math.sqrt(0.7 * 1.0)
    optics = table.at("a", radius_um=0.3, wavelength_um=at)
    assert optics.index == pytest.approx(1.38 + 0j, abs=1e-12)
    ball = sphere(1.38, 2 * math.pi * 0.3 / at)
    found = optics.extinction_efficiency
    assert optics.size_parameter == pytest.approx(ball.size_parameter, rel=1e-12)
    assert abs(found.value - ball.extinction_efficiency) <= found.interpolation_error
    with pytest.raises(BadInput, match="changes with wavelength"):
        table.at("a", size_parameter=1.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        ({"particle": "flake", "size_parameter": 1.0}, "no particle 'flake'"),
        ({"particle": "a"}, "exactly one of"),
        ({"particle": "a", "size_parameter": 1.0, "radius_um": 1.0}, "exactly one of"),
        ({"particle": "a", "radius_um": 0.2}, "needs a wavelength_um"),
        ({"particle": "a", "size_parameter": 80.0}, "lies outside the table"),
        ({"particle": "a", "radius_um": 0.2, "wavelength_um": 3.0}, "wavelength 3 um lies outside"),
        ({"particle": "a", "size_parameter": 1.0, "index": 1.6}, "lies outside those"),
    ],
)
def test_nothing_is_extrapolated(call, message, table) -> None:
    with pytest.raises(BadInput, match=message):
        table.at(**call)


def test_other_shapes_and_unsolved_sizes_are_left_out() -> None:
    dataset = spheres()
    dataset.attrs["config"] = CONFIG.replace("{name: b, shape: {kind: sphere}}", "").replace(
        "  - \n", ""
    )
    dataset["status"].values[0, :, 25:] = 3
    dataset["extinction_efficiency"].values[0, :, 25:] = np.nan
    table = Table(dataset)
    optics = table.at("a", size_parameter=1.0, index=1.41 + 0.015j)
    # Between a, c and d: b is of unknown shape.
    assert optics.extinction_efficiency.value == pytest.approx(
        sphere(1.41 + 0.015j, 1.0).extinction_efficiency, rel=0.01
    )
    with pytest.raises(BadInput, match="outside the table"):
        Table(dataset.isel(particle=[0])).at("a", size_parameter=3.0)
    with pytest.raises(BadInput, match="outside"):
        table.at("b", size_parameter=1.0, index=1.41 + 0.01j)


def test_bars_of_the_table_are_added(table) -> None:
    wide = spheres()
    wide["extinction_efficiency_error"].values[:] = 0.01 * wide["extinction_efficiency"].values
    found = Table(wide).at("a", size_parameter=1.234).extinction_efficiency
    plain = table.at("a", size_parameter=1.234).extinction_efficiency
    # The weights of a cubic have an absolute sum of 1.25 on even steps; these are uneven.
    assert 0.01 * found.value <= found.error - plain.error < 0.016 * found.value


def test_a_published_table_is_opened_by_name(tmp_path) -> None:
    dataset = spheres(radius_um=np.geomspace(0.1, 0.2, 6), indices={"a": 1.4 + 0j})
    publish_table(tmp_path / "table.zarr", dataset)
    found = scatterloom.Table(tmp_path / "table.zarr").at("a", size_parameter=1.5)
    assert found.extinction_efficiency.value == pytest.approx(
        sphere(1.4, 1.5).extinction_efficiency, rel=1e-3
    )
    assert found.scattering_matrix.value.shape == (19, 4, 4)


def test_blending_reproduces_planes_and_knows_its_hull() -> None:
    points = np.array([[1.3, 0.0], [1.5, 0.0], [1.3, 1e-3], [1.5, 1e-3], [1.4, 4e-4]])
    plane = 2.0 * points[:, 0] - 300.0 * points[:, 1]
    for target in ([1.33, 1e-4], [1.49, 9e-4], [1.5, 5e-4]):
        weights = blend(points, np.array(target))
        assert weights is not None and (weights >= -1e-9).all() and (weights > 0).sum() <= 3
        assert weights @ plane == pytest.approx(2.0 * target[0] - 300.0 * target[1], abs=1e-9)
        values = {i: np.array(v) for i, v in enumerate(plane)}
        assert left_out_error(points, weights, values) < 1e-9
    assert blend(points, np.array([1.6, 0.0])) is None
    assert blend(points[:2], np.array([1.4, 1e-3])) is None
    assert blend(points[:1], np.array([1.4, 1e-3])) is None


def test_particles_with_other_cores_are_kept_apart() -> None:
    dataset = spheres()
    for part, core in (("n", [1.5, np.nan, np.nan, np.nan]), ("k", [0.0, np.nan, np.nan, np.nan])):
        values = np.repeat(np.array(core)[:, None], 2, axis=1)
        dataset[f"core_refractive_index_{part}"] = (("particle", "wavelength"), values)
    table = Table(dataset)
    with pytest.raises(BadInput, match="lies outside those"):
        table.at("a", size_parameter=2.0, index=1.42 + 0.01j)  # no other has its core
    assert table.at("a", size_parameter=2.0).index == 1.40 + 0.01j
    dataset["core_refractive_index_n"].values[0] = [1.5, 1.6]
    with pytest.raises(BadInput, match="index of the core of a changes"):
        Table(dataset).at("a", size_parameter=2.0)
    Table(dataset).at("a", size_parameter=2.0, wavelength_um=0.55)
