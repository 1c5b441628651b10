"""A gathered table holds what the closed form says, in the cells it belongs to."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
import xarray
from rayleigh_cases import ABOUT, ANGLES_DEG, FLAGS, HALF_AXES, INDEX, axes, case_files, records

import scatterloom
from oracles import rayleigh
from scatterloom.errors import IntegrityError
from scatterloom.scattering.record import FAILED, MISSING, SOLVED_WITH_WARNING
from scatterloom.store import schema
from scatterloom.store.assemble import Cases
from scatterloom.store.casefile import write_records
from scatterloom.store.table import gather

SIZES = (0.01, 0.02, 0.03)


@pytest.fixture(scope="module")
def path(tmp_path_factory):
    folder = tmp_path_factory.mktemp("campaign")
    gathered = gather(folder / "table.zarr", axes(), case_files(folder, records()), ABOUT, FLAGS)
    assert gathered.replaced
    assert gathered.cells == {"missing": 0, "solved": 12, "solved_with_warning": 0, "failed": 0}
    return gathered.path


@pytest.fixture(scope="module")
def table(path):
    return scatterloom.open_table(path).load()


def test_matrices_are_the_closed_form_in_every_cell(table):
    for name, half_axes in HALF_AXES.items():
        exact = rayleigh.scattering_matrix(half_axes, INDEX, ANGLES_DEG)
        found = table.scattering_matrix.sel(particle=name)
        # Both are exact to rounding: the series of degree 2 holds a Rayleigh matrix.
        np.testing.assert_allclose(found, np.broadcast_to(exact, found.shape), atol=1e-13)


def test_half_widths_are_those_of_the_records(table):
    for position, name in ((1, "scattering_matrix_error"), (2, "scattering_matrix_ratio_error")):
        expected = np.stack([r.scattering_matrix(ANGLES_DEG)[position] for r in records()])
        found = table[name].values[:, 0].reshape(expected.shape)
        assert expected.max() > 1e-3
        np.testing.assert_array_equal(found, expected.astype(np.float32))


def test_efficiencies_are_the_closed_form_in_every_cell(table):
    for name, half_axes in HALF_AXES.items():
        for size, x in enumerate(SIZES):
            for quantity, exact in rayleigh.efficiencies(half_axes, INDEX, x).items():
                cell = table.sel(particle=name).isel(size=size)
                assert (cell[quantity] == exact).all(), (name, x, quantity)
                assert (cell[f"{quantity}_error"] == 1e-3 * abs(exact)).all()


def test_coordinates(table):
    assert list(table.particle.values) == ["ball", "plate"]
    np.testing.assert_array_equal(table.wavelength, [0.5, 1.0])
    np.testing.assert_array_equal(table["size"], [0, 1, 2])
    np.testing.assert_array_equal(table.angle, ANGLES_DEG)
    np.testing.assert_array_equal(table.row, [1, 2, 3, 4])
    np.testing.assert_array_equal(table.col, [1, 2, 3, 4])
    # x = 2 pi r / wavelength, in vacuum.
    x = 2 * np.pi * table.radius_um / table.wavelength
    np.testing.assert_allclose(x.transpose(*table.size_parameter.dims), table.size_parameter)
    assert (table.refractive_index_n == INDEX.real).all()
    assert (table.refractive_index_k == INDEX.imag).all()
    assert table.core_refractive_index_n.isnull().all()
    assert table.core_refractive_index_k.isnull().all()


def test_plain_xarray_opens_it_without_a_warning(path):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        plain = xarray.open_zarr(path)
        assert float(plain.extinction_efficiency.max()) > 0
    assert {"size_parameter", "radius_um"} <= set(plain.coords)


def test_every_variable_says_what_it_is(table):
    assert set(table.variables) == {v.name for v in schema.variables()}
    for name, variable in table.variables.items():
        assert variable.attrs["long_name"], name
        content = variable.attrs["coverage_content_type"]
        assert (content == "coordinate") == (name in table.coords), name
        assert (content == "qualityInformation") >= str(name).endswith("_error"), name
        numeric = variable.dtype.kind in "fi" and not name.endswith(("status", "flags"))
        assert numeric == ("units" in variable.attrs), name


def test_values_and_their_half_widths_are_linked_both_ways(table):
    errors = {name for name in table.variables if str(name).endswith("_error")}
    linked = set()
    for name, variable in table.variables.items():
        companions = variable.attrs.get("ancillary_variables", "").split()
        assert set(companions) <= set(table.variables), name
        linked |= {c for c in companions if c.endswith("_error")}
    assert linked == errors
    assert len(errors) == 7
    for name in errors:
        assert table[name].attrs["coverage_percent"] == 95
        assert "95 %" in table[name].attrs["long_name"]


def test_flags_are_cf_flags(table):
    status = table.status.attrs
    assert list(status["flag_values"]) == [0, 1, 2, 3]
    assert status["flag_meanings"] == "missing solved solved_with_warning failed"
    warnings_ = table.warning_flags.attrs
    assert warnings_["flag_meanings"] == "first_warning second_warning"
    assert list(warnings_["flag_masks"]) == [1, 2]
    assert warnings_["comment"] == "first_warning: one thing; second_warning: another"


def test_provenance_is_complete(table):
    attributes = table.attrs
    for name in ("title", "summary", "keywords", "creator_name", "date_created", "history", "id"):
        assert attributes[name], name
    assert attributes["Conventions"] == "CF-1.11, ACDD-1.3"
    assert attributes["license"] == "CC0-1.0"
    assert attributes["config"] == ABOUT.config
    assert attributes["numerics_revision"] >= 1
    assert attributes["version_scatterloom"] == scatterloom.__version__
    for package in ("python", "numpy", "scipy", "numba", "ducc0", "snakemake", "zarr"):
        assert attributes[f"version_{package}"][0].isdigit()
    assert "Bohren & Huffman" in attributes["sign_convention"]
    assert attributes["time_factor"].startswith("exp(-i w t)")


def test_failed_cases_are_never_numbers_and_keep_their_diagnostics(tmp_path):
    written = records()
    written[1].status, written[1].warning_flags = FAILED, 2
    written[2].status = SOLVED_WITH_WARNING
    gathered = gather(tmp_path / "table.zarr", axes(), case_files(tmp_path, written), ABOUT, FLAGS)
    assert gathered.cells == {"missing": 0, "solved": 8, "solved_with_warning": 2, "failed": 2}
    ball = scatterloom.open_table(gathered.path).sel(particle="ball").load()
    np.testing.assert_array_equal(ball.status, [[1, 3, 2], [1, 3, 2]])
    for name in ("scattering_matrix", "extinction_efficiency", "asymmetry_parameter"):
        for part in (name, f"{name}_error"):
            assert np.isnan(ball[part].isel(size=1)).all()
            assert np.isfinite(ball[part].isel(size=[0, 2])).all()
    np.testing.assert_array_equal(ball.warning_flags.isel(size=1), [2, 2])
    np.testing.assert_array_equal(ball.products.isel(size=1), [4.0, 4.0])


def test_missing_cases_have_a_status_of_their_own_and_only_if_asked_for(tmp_path):
    files = {tmp_path / "ball.cases": [r.digest for r in records()[:3]]}
    files[tmp_path / "plate.cases"] = [r.digest for r in records()[3:]]
    write_records(tmp_path / "ball.cases", records()[:3])
    target = tmp_path / "table.zarr"
    with pytest.raises(IntegrityError, match=r"plate\.cases: the case file is missing"):
        gather(target, axes(), Cases(files), ABOUT, FLAGS)
    assert not target.exists()
    gathered = gather(target, axes(), Cases(files, partial=True), ABOUT, FLAGS)
    assert gathered.cells["missing"] == 6
    plate = scatterloom.open_table(target).sel(particle="plate")
    assert (plate.status == MISSING).all()
    assert np.isnan(plate.scattering_matrix).all()


def test_a_case_file_without_its_case_is_refused(tmp_path):
    write_records(tmp_path / "all.cases", records()[:-1])
    cases = Cases({tmp_path / "all.cases": [r.digest for r in records()]})
    with pytest.raises(IntegrityError, match="is not among its 5 records"):
        gather(tmp_path / "table.zarr", axes(), cases, ABOUT, FLAGS)
    assert [p.name for p in tmp_path.iterdir()] == ["all.cases"]


def test_an_equal_table_is_left_alone_and_another_replaces_it(tmp_path):
    target = tmp_path / "table.zarr"
    first = gather(target, axes(), case_files(tmp_path, records()), ABOUT, FLAGS)
    inode = target.stat().st_ino
    written = records()
    for record in written:
        record.wall_seconds = 99.0  # timings differ in every run and are no content
    second = gather(target, axes(), case_files(tmp_path, written), ABOUT, FLAGS)
    assert not second.replaced
    assert second.content_digest == first.content_digest
    assert target.stat().st_ino == inode
    written[0].scalars["extinction_efficiency"] = (0.125, 0.001)
    third = gather(target, axes(), case_files(tmp_path, written), ABOUT, FLAGS)
    assert third.replaced
    assert third.content_digest != first.content_digest
    table = scatterloom.open_table(target)
    assert (table.extinction_efficiency.sel(particle="ball").isel(size=0) == 0.125).all()
    assert sorted(p.name for p in tmp_path.iterdir()) == ["cases", "table.zarr"]


def test_a_damaged_table_is_written_anew(tmp_path):
    target = tmp_path / "table.zarr"
    gather(target, axes(), case_files(tmp_path, records()), ABOUT, FLAGS)
    chunk = next(
        p for p in sorted((target / "residual").rglob("*")) if p.name == "0" and p.is_file()
    )
    chunk.unlink()
    again = gather(target, axes(), case_files(tmp_path, records()), ABOUT, FLAGS)
    assert again.replaced
    scatterloom.verify(target)


def test_many_shards_hold_the_same_numbers_as_one(tmp_path, monkeypatch):
    sizes = tuple(0.001 * (i + 1) for i in range(7))
    written = records(sizes)
    whole = gather(tmp_path / "a.zarr", axes(sizes), case_files(tmp_path, written), ABOUT, FLAGS)
    per_size = len(ANGLES_DEG) * 16 * 8
    from scatterloom.store import chunks, writer

    def small(shape, item_bytes):
        return chunks.layout(shape, item_bytes, 2 * per_size, 4 * per_size)

    monkeypatch.setattr(writer, "layout", small)
    parts = gather(tmp_path / "b.zarr", axes(sizes), case_files(tmp_path, written), ABOUT, FLAGS)
    one, many = scatterloom.open_table(whole.path), scatterloom.open_table(parts.path)
    assert many.scattering_matrix.encoding["shards"][:3] == (1, 1, 4)
    xarray.testing.assert_equal(one.load(), many.load())
