"""Figures: present, repeatable to the byte, legible by more than colour, honest about gaps."""

from __future__ import annotations

import csv
import json
import math
import struct

import numpy as np
import pytest
from matplotlib.figure import Figure

from oracles.tables import mie_table
from scatterloom.bulk.build import build
from scatterloom.bulk.bulkfile import open_bulk, write_bulk
from scatterloom.bulk.population import Population
from scatterloom.campaign.distribution import Lognormal
from scatterloom.errors import IntegrityError
from scatterloom.figures.axes import plain_log_ticks
from scatterloom.figures.curves import matrix_curves
from scatterloom.figures.effort import product_counts
from scatterloom.figures.make import make_figures
from scatterloom.figures.maps import edges, size_angle_map
from scatterloom.figures.overlay import lidar_scatter, polar_intensity, populations_matrix
from scatterloom.figures.overview import audit_map, size_wavelength_map
from scatterloom.figures.picture import SERIES, read_index, style
from scatterloom.figures.selection import load_ladder, spread_sizes, thinned

HAZE = Population("haze", {"clear": 3.0, "dark": 1.0}, Lognormal(0.12, math.log(1.3)))
SOOT = Population("soot", {"dark": 1.0}, Lognormal(0.1, math.log(1.2)))


@pytest.fixture(scope="module")
def table():
    return mie_table(
        radius_um=np.geomspace(0.05, 0.4, 16),
        angles_deg=np.arange(0.0, 181.0, 5.0),
        wavelength_um=(0.55,),
    )


@pytest.fixture(scope="module")
def drawn(table, tmp_path_factory):
    folder = tmp_path_factory.mktemp("campaign")
    write_bulk(folder / "bulk.zarr", build(table, [HAZE, SOOT]), table.attrs)
    bulk = open_bulk(folder / "bulk.zarr")
    entries, notes = make_figures(table, folder / "figures", bulk, [HAZE, SOOT])
    return folder / "figures", bulk, entries, notes


def test_every_figure_is_there_with_its_words_and_numbers(drawn) -> None:
    folder, _, entries, notes = drawn
    assert notes == []
    names = {entry["name"] for entry in entries}
    ladders = ("clear-0.55um", "dark-0.55um")
    assert names == (
        {f"matrix-{ladder}" for ladder in ladders}
        | {f"map-{ladder}" for ladder in ladders}
        | {"products-clear", "products-dark", "audit-map"}
        | {"population-haze", "population-soot", "populations-0.55um", "polar-0.55um", "lidar"}
    )
    for entry in entries:
        png = (folder / entry["png"]).read_bytes()
        width, height = struct.unpack(">II", png[16:24])
        assert width == 1020  # one column of 86 mm at 300 dpi
        assert 600 < height < 1800  # less than two thirds of a page
        assert (folder / entry["svg"]).read_bytes().startswith(b"<?xml")
        assert (folder / entry["pdf"]).read_bytes().startswith(b"%PDF")
        with open(folder / entry["csv"], newline="") as stream:
            header, *rows = list(csv.reader(stream))
        assert rows and all(len(row) == len(header) for row in rows)
        assert len(entry["alt"]) > 60
        assert len(entry["caption"]) > 60
    for entry in entries:
        if entry["name"].startswith(("matrix", "population")):
            assert "95 % half width" in entry["caption"]
    assert read_index(folder, "0" * 64)["figures"] == entries


def test_figures_are_byte_identical_on_repeat(drawn, table, tmp_path) -> None:
    folder, bulk, _, _ = drawn
    make_figures(table, tmp_path / "again", bulk, [HAZE, SOOT])
    first = {path.name: path.read_bytes() for path in folder.iterdir()}
    second = {path.name: path.read_bytes() for path in (tmp_path / "again").iterdir()}
    assert first == second


def test_svg_keeps_text_and_carries_no_date_or_link(drawn) -> None:
    folder, *_ = drawn
    for path in folder.glob("*.svg"):
        text = path.read_text()
        assert "<text" in text
        assert "<dc:date>" not in text
        assert "matplotlib.org" not in text


def luminance(colour: str) -> float:
    """Relative luminance (WCAG 2.1, definition of relative luminance)."""
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return float(np.dot(linear, [0.2126, 0.7152, 0.0722]))


def test_series_differ_by_line_and_marker_and_stand_out_from_white() -> None:
    colours, lines, markers = zip(*SERIES, strict=True)
    assert len(set(lines)) == len(set(markers)) == len(set(colours)) == len(SERIES)
    for colour in colours:
        assert 1.05 / (luminance(colour) + 0.05) > 4.5


def test_numbers_behind_the_curves_are_those_of_the_table(drawn, table) -> None:
    folder, *_ = drawn
    with open(folder / "matrix-dark-0.55um.csv", newline="") as stream:
        rows = list(csv.DictReader(stream))
    sizes = {row["size parameter"] for row in rows}
    assert len(sizes) == 4
    ladder = load_ladder(table, 1, 0)
    last = [row for row in rows if float(row["size parameter"]) == max(map(float, sizes))]
    for row in last:
        at = int(np.argmin(np.abs(ladder.angle_deg - float(row["angle (deg)"]))))
        f = ladder.matrix[-1, at]
        assert float(row["F11"]) == pytest.approx(f[0, 0], rel=1e-4)
        assert float(row["−F12/F11"]) == pytest.approx(-f[0, 1] / f[0, 0], abs=1e-4)
        half_width = ladder.half_width[-1, at, 0, 0]
        assert float(row["F11 half width"]) == pytest.approx(half_width, rel=1e-4)
        own = ladder.ratio_half_width[-1, at, 0, 1]
        assert float(row["−F12/F11 half width"]) == pytest.approx(own, rel=1e-4)


def test_half_widths_have_panels_of_their_own(table) -> None:
    ladder = load_ladder(table, 1, 0)
    with style():
        figure = matrix_curves(ladder).figure
    panels = {axes.get_title(loc="left"): axes for axes in figure.axes}
    assert len(panels) == 8
    for title, expected in (
        ("half width of $F_{11}$ (%)", 100 * ladder.ratio_half_width[-1, :, 0, 0]),
        (
            "half width, widest ratio",
            ladder.ratio_half_width[-1][:, [1, 2, 3, 0, 2], [1, 2, 3, 1, 3]].max(axis=1),
        ),
    ):
        drawn = panels[title].lines[3].get_ydata()
        np.testing.assert_allclose(drawn, expected)
        assert panels[title].get_yscale() == "log"
    # Spheres have F22 = F11: rounding must not fill the panel.
    low, high = panels["$F_{22}/F_{11}$"].get_ylim()
    assert low < 0.96 and high > 1.04


@pytest.mark.parametrize(
    ("low", "high", "shown"),
    [
        (0.06, 0.8, ["0.1", "0.2", "0.5"]),
        (1.2, 5.7, ["2", "3", "4"]),
        (2e-4, 5e-3, ["0.0002", "0.0005", "0.001", "0.002", "0.005"]),
        (0.02, 40.0, ["0.1", "1", "10"]),
        (1.2, 1.4, ["1.2", "1.4"]),
    ],
)
def test_logarithmic_axes_have_plain_numbers(low: float, high: float, shown: list[str]) -> None:
    axes = Figure().subplots()
    axes.set_xscale("log")
    axes.set_xlim(low, high)
    plain_log_ticks(axes.xaxis, low, high)
    assert [label.get_text() for label in axes.get_xticklabels()] == shown
    assert axes.get_xticklabels(minor=True) == []


def test_gaps_are_left_out_and_named(table, tmp_path) -> None:
    holed = table.copy(deep=True)
    holed["status"][0] = 0
    holed["scattering_matrix"][0] = np.nan
    holed["status"][1, 0, 3:] = 3
    holed["scattering_matrix"][1, 0, 3:] = np.nan
    entries, notes = make_figures(holed, tmp_path / "figures")
    names = {entry["name"] for entry in entries}
    assert "matrix-clear-0.55um" not in names
    assert "map-dark-0.55um" not in names
    assert "matrix-dark-0.55um" in names
    # Matrix, map and products of the first particle, the map of the second.
    assert len([note for note in notes if note.startswith("not drawn")]) == 4
    listed = json.loads((tmp_path / "figures" / "figures.json").read_text())
    assert listed["notes"] == notes


def test_a_long_campaign_is_cut_and_says_so(table, tmp_path, monkeypatch) -> None:
    monkeypatch.setattr("scatterloom.figures.make.LADDERS_SHOWN", 1)
    entries, notes = make_figures(table, tmp_path / "figures")
    assert [e["name"] for e in entries] == [
        "matrix-clear-0.55um",
        "map-clear-0.55um",
        "products-clear",
        "audit-map",
    ]
    assert any("the first 1 of 2 pairs" in note for note in notes)
    assert any("the first 1 of 2 particles" in note for note in notes)


def test_an_interrupted_drawing_leaves_no_index(table, tmp_path, monkeypatch) -> None:
    folder = tmp_path / "figures"
    make_figures(table.isel(particle=[0], wavelength=[0]), folder)

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("scatterloom.figures.make.save", full)
    with pytest.raises(OSError, match="space"):
        make_figures(table, folder)
    with pytest.raises(IntegrityError, match="not written yet"):
        read_index(folder, "0" * 64)


def test_an_index_of_another_table_or_with_lost_files_is_refused(table, tmp_path) -> None:
    folder = tmp_path / "figures"
    make_figures(table.isel(particle=[0], wavelength=[0]), folder)
    with pytest.raises(IntegrityError, match="another table"):
        read_index(folder, "1" * 64)
    (folder / "products-clear.png").unlink()
    with pytest.raises(IntegrityError, match=r"products-clear\.png: missing"):
        read_index(folder, "0" * 64)
    (folder / "figures.json").write_text("{")
    with pytest.raises(IntegrityError, match="unreadable"):
        read_index(folder, "0" * 64)


def test_figures_of_an_earlier_campaign_file_are_removed(table, tmp_path) -> None:
    few = table.isel(size=[0, 1])
    make_figures(few, tmp_path)
    entries, _ = make_figures(few.isel(particle=[1]), tmp_path)
    left = {path.stem for path in tmp_path.iterdir()} - {"figures"}
    assert (
        left
        == {entry["name"] for entry in entries}
        == {
            "matrix-dark-0.55um",
            "products-dark",
            "audit-map",
        }
    )


def test_signed_map_is_centred_on_zero(table) -> None:
    with style():
        picture = size_angle_map(load_ladder(table, 1, 0))
    mesh = picture.figure.axes[1].collections[0]
    low, high = mesh.get_clim()
    assert low == -high


def test_sizes_shown_span_the_ladder(table) -> None:
    ladder = load_ladder(table, 0, 0)
    chosen = spread_sizes(ladder, 4)
    assert chosen[0] == 0 and chosen[-1] == 15 and len(chosen) == 4
    ladder.solved[[0, 15]] = False
    assert spread_sizes(ladder, 4)[[0, -1]].tolist() == [1, 14]
    assert spread_sizes(ladder, 20).size == 14
    assert thinned(ladder.angle_deg, 20.0).tolist() == list(range(0, 37, 4))


def test_cells_of_a_map_lie_around_their_centres() -> None:
    np.testing.assert_allclose(edges(np.array([1.0, 2.0, 4.0])), [0.5, 1.5, 3.0, 5.0])


def test_equal_cases_of_two_wavelengths_count_once_in_products() -> None:
    table = mie_table(radius_um=np.geomspace(0.05, 0.41, 16), angles_deg=np.array([0.0, 180.0]))
    shared = table.copy(deep=True)
    shared["size_parameter"].values[1] = shared["size_parameter"].values[0]
    with style():
        picture = product_counts(table, 0)
        assert "32 solved cases" in picture.caption
        assert "mean over the lattices" in picture.caption
        assert picture.figure.axes[0].get_ylabel() == "products per wave, mean over lattices"
        assert "16 solved cases" in product_counts(shared, 0).caption
        # 4 of 16 at 20 products, the others at 4: 128 of 320 are left.
        assert "60 % of the products" in product_counts(shared, 0).caption


def test_nothing_solved_is_an_error_with_a_name(table) -> None:
    empty = table.copy(deep=True)
    empty["status"][:] = 0
    for draw in (
        lambda: matrix_curves(load_ladder(empty, 0, 0)),
        lambda: size_angle_map(load_ladder(empty, 0, 0)),
        lambda: product_counts(empty, 0),
    ):
        with pytest.raises(ValueError, match="clear"):
            draw()


def test_map_over_wavelength_needs_three_and_the_same_radii() -> None:
    table = mie_table(
        np.geomspace(0.05, 0.3, 8), (0.4, 0.5, 0.6), np.array([0.0, 90.0, 180.0]), {"a": 1.4 + 0j}
    )
    with style():
        picture = size_wavelength_map(table, 0)
        low = float(table["extinction_efficiency"].min())
        assert f"extinction efficiency {low:.3g} to" in picture.alt
        with pytest.raises(ValueError, match="needs 3"):
            size_wavelength_map(table.isel(wavelength=[0, 1]), 0)
        moved = table.copy(deep=True)
        moved["radius_um"].values[1] *= 2.0
        with pytest.raises(ValueError, match="same radii"):
            size_wavelength_map(moved, 0)


def test_audit_map_marks_what_is_wider_than_asked(table) -> None:
    wide = table.copy(deep=True)
    wide["scattering_matrix_ratio_error"].values[:] = 0.001
    wide["scattering_matrix_ratio_error"].values[1, 0, 12:] = 0.05
    wide["status"].values[0, 0, 3] = 3
    with style():
        picture = audit_map(wide, (0.02, 0.01))
        assert "4 cells are wider" in picture.alt and "Dots: wider than asked" in picture.caption
        dots = [line for line in picture.figure.axes[0].lines if line.get_marker() == "."]
        assert sorted(dots[0].get_xdata()) == [12, 13, 14, 15]
        assert set(dots[0].get_ydata()) == {1}
        crosses = [line for line in picture.figure.axes[0].lines if line.get_marker() == "x"]
        assert crosses[0].get_xdata().tolist() == [3]
        assert "Dots" not in audit_map(wide, None).caption
    wide["status"].values[:] = 0
    with pytest.raises(ValueError, match="no case is solved"):
        audit_map(wide, None)


def test_pictures_of_populations_show_their_numbers(drawn) -> None:
    folder, bulk, *_ = drawn
    with open(folder / "lidar.csv", newline="") as stream:
        _, *rows = list(csv.reader(stream))
    assert [row[0] for row in rows] == ["haze", "soot"]
    for i, row in enumerate(rows):
        assert float(row[2]) == pytest.approx(float(bulk["lidar_ratio"][i, 0]), rel=1e-4)
        assert float(row[3]) == pytest.approx(float(bulk["lidar_ratio_error"][i, 0]), rel=1e-4)
    alone = bulk.isel(population=[0])
    with style():
        with pytest.raises(ValueError, match="fewer than two"):
            populations_matrix(alone, 0)
        picture = polar_intensity(alone, 0)
        (curve,) = [line for line in picture.figure.axes[0].lines if len(line.get_xdata()) > 2]
        # Both halves, mirror images.
        radius = np.asarray(curve.get_ydata())
        np.testing.assert_array_equal(radius, radius[::-1])
        missing = bulk.copy(deep=True)
        missing["lidar_ratio"] = np.nan * missing["lidar_ratio"]
        with pytest.raises(ValueError, match="180"):
            lidar_scatter(missing)
