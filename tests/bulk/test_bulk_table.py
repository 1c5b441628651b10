"""Bulk properties of a whole table: contents, flags, and publication."""

from __future__ import annotations

import math

import numpy as np
import pytest

from oracles.mie import sphere
from oracles.tables import mie_table
from scatterloom.bulk import schema
from scatterloom.bulk.build import angle_blocks, build
from scatterloom.bulk.bulkfile import open_bulk, write_bulk
from scatterloom.bulk.population import Population
from scatterloom.bulk.quantities import spectral
from scatterloom.campaign.distribution import Gamma, Lognormal
from scatterloom.errors import BadInput, IntegrityError

HAZE = Population(
    "haze",
    {"clear": 3.0, "dark": 1.0},
    Lognormal(0.12, math.log(1.25)),
    densities={"clear": 1.0, "dark": 2.0},
)
DARK = Population("soot", {"dark": 1.0}, Gamma(0.2, 0.03), densities={"dark": 1.8})


@pytest.fixture(scope="module")
def table():
    return mie_table(angles_deg=np.arange(0.0, 181.0, 6.0), radius_um=np.geomspace(0.03, 0.6, 60))


@pytest.fixture(scope="module")
def columns(table):
    return build(table, [HAZE, DARK])


def test_every_variable_has_its_shape_and_no_hole(columns) -> None:
    assert set(columns) == {v.name for v in schema.variables()}
    assert columns["scattering_matrix"].shape == (2, 2, 31, 4, 4)
    assert columns["status"].tolist() == [[1, 1], [1, 1]]
    assert columns["number_fraction"].tolist() == [[0.75, 0.25], [0.0, 1.0]]
    to_the_next = set(spectral(columns, 0, 0, 1))
    for name in schema.VALUE_NAMES:
        value, half_width = columns[name], columns[f"{name}_error"]
        if name in to_the_next:  # the last wavelength has no next one
            assert np.isnan(value[:, -1]).all(), name
            value, half_width = value[:, :-1], half_width[:, :-1]
        if name == "depolarization_spectral_ratio":  # spheres do not depolarize
            assert np.isnan(value).all()
            continue
        assert np.isfinite(value).all(), name
        assert (half_width >= 0).all(), name


def test_spheres_do_not_depolarize_and_the_matrix_is_normalized(columns) -> None:
    depolarization = columns["linear_depolarization_ratio"]
    assert np.abs(depolarization).max() < 1e-9
    # Circular depolarization is 2 dL/(1 - dL) for any randomly oriented ensemble.
    assert np.abs(columns["circular_depolarization_ratio"]).max() < 1e-9
    x = np.cos(np.deg2rad(columns["angle"]))
    np.testing.assert_allclose(
        np.abs(np.trapezoid(columns["scattering_matrix"][..., 0, 0], x, axis=-1)),
        2.0,
        rtol=0.02,  # trapezium rule on 6 deg
    )
    balance = (
        columns["scattering_cross_section"]
        + columns["absorption_cross_section"]
        - columns["extinction_cross_section"]
    )
    assert np.abs(balance / columns["extinction_cross_section"]).max() < 1e-12


def test_lidar_ratio_of_a_narrow_population_is_that_of_one_sphere(table) -> None:
    radius = float(table["radius_um"][0, 36])
    narrow = Population("narrow", {"dark": 1.0}, Lognormal(radius, 0.002))
    out = build(table, [narrow])
    ball = sphere(1.55 + 0.05j, 2 * math.pi * radius / 0.55)
    # S = 4 pi Qext/Qback with Qback = 4 |S(180)|^2/x^2 (Bohren & Huffman 1983, section 4.6):
    # the backscattering cross section is 4 pi times the differential one.
    expected = 4 * math.pi * ball.extinction_efficiency / ball.backscattering_efficiency
    assert out["lidar_ratio"][0, 0] == pytest.approx(expected, rel=1e-3)
    dolp = out["degree_of_linear_polarization"][0, 0]
    matrix = ball.scattering_matrix(out["angle"])
    np.testing.assert_allclose(dolp, -matrix[:, 0, 1] / matrix[:, 0, 0], atol=2e-4)
    assert out["extinction_share_below"][0, 0] < 1e-12


def test_flags_tell_what_was_wrong(table) -> None:
    damaged = table.copy(deep=True)
    damaged["status"][1, 0, 20] = 3
    damaged["scattering_matrix"][1, 0, 20] = np.nan
    damaged["extinction_efficiency"][1, 0, 20] = np.nan
    damaged["status"][0, 0, 5] = 2
    damaged["status"][1, 1, 3:] = 0
    wide = Population("wide", {"dark": 1.0}, Gamma(0.4, 0.2))
    out = build(damaged, [HAZE, wide])
    f = schema.FLAGS
    assert out["warning_flags"][0, 0] == f["missing_sizes"] | f["cases_with_warning"]
    assert np.isfinite(out["scattering_matrix"][0, 0]).all()
    assert out["warning_flags"][1, 0] & f["truncated_by_table"]
    assert out["status"][:, 0].tolist() == [2, 2]
    assert out["extinction_share_above"][1, 0] > 0.05
    assert out["status"][:, 1].tolist() == [3, 3]
    assert out["warning_flags"][1, 1] & f["too_few_sizes"]
    assert np.isnan(out["extinction_cross_section"][:, 1]).all()
    assert out["size_count"][1, 1] == 3


def test_a_population_that_the_table_does_not_cover_is_refused(table) -> None:
    out = build(table, [Population("coarse", {"dark": 1.0}, Gamma(1.5, 0.1))])
    f = schema.FLAGS
    assert out["status"].tolist() == [[3, 3]]
    assert (out["warning_flags"] & (f["not_covered"] | f["truncated_by_table"]) == 40).all()
    assert (out["extinction_share_above"] > 0.9).all()
    for name in schema.VALUE_NAMES:
        assert np.isnan(out[name]).all(), name


def test_blocks_of_angles_give_what_the_whole_gives(table, columns, monkeypatch) -> None:
    """With room for a few angles only, of a table that stays on disk until asked."""
    loaded = []
    monkeypatch.setattr("scatterloom.bulk.build.BLOCK_BYTES", 5 * 3 * 16 * 8 * 60 * 2)
    blocks = angle_blocks(60, 31, 2)
    assert [b.stop - b.start for b in blocks] == [5] * 6 + [1]
    lazy = table.chunk({"size": 20, "angle": 7})

    class Spy(type(lazy)):
        __slots__ = ()

        def load(self, **keywords):
            loaded.append(self.nbytes)
            return super().load(**keywords)

    spied = Spy(lazy.data_vars, lazy.coords, lazy.attrs)
    out = build(spied, [HAZE, DARK])
    for name in schema.VALUE_NAMES:
        np.testing.assert_allclose(out[name], columns[name], rtol=1e-12, equal_nan=True)
    whole = 2 * 60 * 31 * 16 * (8 + 4 + 4)
    assert loaded and max(loaded) < 0.2 * whole


def test_coarse_grid_is_flagged() -> None:
    coarse = mie_table(
        radius_um=np.geomspace(0.03, 0.9, 9), angles_deg=np.array([0.0, 90.0, 180.0])
    )
    out = build(coarse, [DARK])
    assert (out["warning_flags"] & schema.FLAGS["coarse_size_grid"]).all()
    assert (out["quadrature_error"] > 0.01).all()


def test_without_backscattering_its_quantities_are_missing() -> None:
    forward = mie_table(angles_deg=np.array([0.0, 60.0, 120.0]))
    out = build(forward, [DARK])
    assert np.isnan(out["lidar_ratio"]).all()
    assert np.isfinite(out["degree_of_linear_polarization"]).all()


def test_unknown_particle_is_bad_input(table) -> None:
    with pytest.raises(BadInput, match="no particle flake"):
        build(table, [Population("odd", {"flake": 1.0}, Gamma(0.2, 0.1))])


def test_published_and_read_back(tmp_path, table, columns) -> None:
    path = tmp_path / "bulk.zarr"
    assert write_bulk(path, columns, table.attrs)
    again = write_bulk(path, columns, table.attrs)
    assert not again
    back = open_bulk(path)
    for variable in schema.variables():
        if variable.dtype == "string":
            assert [str(t) for t in back[variable.name].values] == list(columns[variable.name])
        else:
            np.testing.assert_array_equal(back[variable.name].values, columns[variable.name])
    assert back["lidar_ratio"].attrs["ancillary_variables"] == "lidar_ratio_error status"
    assert "fully correlated" in back.attrs["error_statement"]
    assert back.attrs["table_content_digest"] == table.attrs["content_digest"]
    assert back.attrs["config"] == table.attrs["config"]


def test_changed_populations_replace_the_file(tmp_path, table, columns) -> None:
    path = tmp_path / "bulk.zarr"
    write_bulk(path, columns, table.attrs)
    assert write_bulk(path, build(table, [DARK]), table.attrs)
    assert open_bulk(path).sizes["population"] == 1


def test_altered_file_is_refused(tmp_path, table, columns) -> None:
    path = tmp_path / "bulk.zarr"
    write_bulk(path, columns, table.attrs)
    chunk = next(p for p in sorted(path.rglob("*")) if p.is_file() and "lidar_ratio/c" in str(p))
    data = bytearray(chunk.read_bytes())
    data[len(data) // 2] ^= 1
    chunk.write_bytes(bytes(data))
    with pytest.raises(IntegrityError, match="lidar_ratio"):
        open_bulk(path)
    assert write_bulk(path, columns, table.attrs)
    open_bulk(path)
