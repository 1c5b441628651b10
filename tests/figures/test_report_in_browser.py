"""The interactive view of the report in a real browser without a network."""

from __future__ import annotations

import base64
import csv
import io
import os
import shutil
import struct
import urllib.parse
import zlib

import numpy as np
import pytest

from figures.test_report import render
from oracles.tables import mie_table
from scatterloom.figures.make import make_figures

BROWSER, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
missing = not (BROWSER and DRIVER)
pytestmark = pytest.mark.skipif(
    missing and not os.environ.get("CI"), reason="needs chromium and chromium-driver"
)


@pytest.fixture(scope="module")
def table():
    out = mie_table(
        radius_um=np.geomspace(0.05, 0.3, 8),
        angles_deg=np.arange(0.0, 181.0, 5.0),
        indices={"dark": 1.55 + 0.05j, "clear": 1.4 + 0j},
    )
    out.attrs["title"] = "Silt </script><script>document.title='stolen'</script>"
    out["status"][1, 1, 3] = 3
    return out


@pytest.fixture(scope="module")
def page(table, tmp_path_factory):
    assert not missing, "continuous integration needs chromium (scripts/system-packages)"
    from selenium import webdriver

    folder = tmp_path_factory.mktemp("report")
    make_figures(table, folder)
    path = folder / "report.html"
    path.write_text(render(table, folder), encoding="utf-8")
    options = webdriver.ChromeOptions()
    options.binary_location = BROWSER
    for option in ("headless=new", "no-sandbox", "disable-gpu", "window-size=1100,1400"):
        options.add_argument(f"--{option}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options, webdriver.ChromeService(DRIVER))
    driver.get(path.as_uri())
    yield driver
    driver.quit()


def choose(page, name: str, value: str) -> None:
    page.execute_script(
        "const s = document.getElementById(arguments[0]); s.value = arguments[1];"
        "s.dispatchEvent(new Event('change'));",
        name,
        value,
    )


def said(page) -> str:
    return page.find_element("id", "view-readout").text


def press(page, *keys) -> None:
    page.find_element("id", "view-drawing").send_keys(*keys)


def saved(page, button: str) -> str:
    """Address of what a button would save."""
    page.execute_script(
        "window.saved = ''; HTMLAnchorElement.prototype.click = function () "
        "{ window.saved = this.href; };"
    )
    page.find_element("id", button).click()
    from selenium.webdriver.support.wait import WebDriverWait

    WebDriverWait(page, 10).until(lambda p: p.execute_script("return window.saved"))
    return page.execute_script("return window.saved")


def test_no_error_no_request_no_foreign_script(page, table) -> None:
    assert page.title == f"{table.attrs['title']}: campaign report"
    assert not [entry for entry in page.get_log("browser") if entry["level"] == "SEVERE"]
    assert page.execute_script("return performance.getEntriesByType('resource').length") == 0
    assert page.find_element("id", "view").is_displayed()


def test_values_are_those_of_the_table(page, table) -> None:
    from selenium.webdriver.common.keys import Keys

    choose(page, "view-what", "0")
    choose(page, "view-who-a", "1")
    choose(page, "view-wave-a", "0")
    choose(page, "view-size-a", "5")
    press(page, Keys.HOME, Keys.PAGE_DOWN, *[Keys.ARROW_RIGHT] * 10)
    # PageDown goes back ten steps: the first angle, then ten to the right.
    cell = table.isel(particle=1, wavelength=0, size=5)
    value = float(cell.scattering_matrix.isel(angle=10, row=0, col=0))
    width = float(cell.scattering_matrix_ratio_error.isel(angle=10, row=0, col=0)) * value
    words = said(page)
    assert words.startswith("50 deg. clear, 0.55 um, r ")
    number, bar = words.rsplit(": ", 1)[1].split(" ± ")
    # Four digits of the value, two of its half width.
    assert float(number) == pytest.approx(value, rel=6e-4)
    assert float(bar) == pytest.approx(width, rel=0.06)


def test_saved_numbers_are_the_curve(page, table) -> None:
    choose(page, "view-who-a", "0")
    choose(page, "view-wave-a", "1")
    choose(page, "view-what", "p")
    choose(page, "view-size-a", "2")
    address = saved(page, "view-csv")
    assert address.startswith("data:text/csv")
    rows = list(csv.reader(io.StringIO(urllib.parse.unquote(address.split(",", 1)[1]))))
    assert rows[0] == ["angle_deg", "value", "half_width", "curve"]
    numbers = np.array([[float(v) for v in row[:3]] for row in rows[1:]])
    cell = table.isel(particle=0, wavelength=1, size=2)
    f = cell.scattering_matrix.values
    np.testing.assert_array_equal(numbers[:, 0], table.angle.values)
    np.testing.assert_allclose(numbers[:, 1], -f[:, 0, 1] / f[:, 0, 0], atol=1e-6)
    expected = cell.scattering_matrix_ratio_error.values[:, 0, 1]
    np.testing.assert_allclose(numbers[:, 2], expected, rtol=1e-5)


def test_quantities_over_size(page, table) -> None:
    choose(page, "view-what", "s0")
    assert not page.find_element("id", "view-size-a").is_enabled()
    address = saved(page, "view-csv")
    rows = list(csv.reader(io.StringIO(urllib.parse.unquote(address.split(",", 1)[1]))))[1:]
    wanted = table.extinction_efficiency.isel(particle=0, wavelength=1).values
    np.testing.assert_allclose([float(row[1]) for row in rows], wanted, rtol=1e-6)
    # A failed cell is left out, not drawn as a zero.
    choose(page, "view-who-a", "1")
    address = saved(page, "view-csv")
    assert urllib.parse.unquote(address).count("\n") == 1 + 7


def test_zoom_by_buttons_and_keys(page) -> None:
    def labels():
        return page.execute_script(
            "return [...document.querySelectorAll('#view-drawing text')].map(t => t.textContent)"
        )

    choose(page, "view-what", "0")
    whole = labels()
    page.find_element("id", "view-in").click()
    press(page, "+")
    assert labels() != whole
    press(page, "0")
    assert labels() == whole
    page.find_element("id", "view-in").click()
    page.find_element("id", "view-reset").click()
    assert labels() == whole


def test_two_curves(page) -> None:
    second = page.find_element("id", "view-who-b")
    assert not second.is_displayed()
    page.find_element("id", "view-compare").click()
    assert second.is_displayed()
    curves = page.find_elements("css selector", "#view-drawing polyline")
    assert len(curves) == 2
    assert len({c.get_attribute("stroke") for c in curves}) == 2
    assert len({c.get_attribute("stroke-dasharray") for c in curves}) == 2
    assert said(page).count("±") == 2
    page.find_element("id", "view-compare").click()


def test_saved_picture_decodes(page) -> None:
    address = saved(page, "view-png")
    raw = base64.b64decode(address.removeprefix("data:image/png;base64,"))
    assert raw.startswith(b"\x89PNG\r\n\x1a\n")
    assert struct.unpack(">II", raw[16:24]) == (1440, 800)
    # Something is drawn: the compressed rows hold more than one colour.
    place, content = 8, b""
    while place < len(raw):
        length, kind = struct.unpack(">I4s", raw[place : place + 8])
        if kind == b"IDAT":
            content += raw[place + 8 : place + 8 + length]
        place += 12 + length
    assert len(set(zlib.decompress(content))) > 20


def test_dark_and_narrow(page) -> None:
    def colours():
        return page.execute_script(
            "const s = getComputedStyle(document.body); return [s.color, s.backgroundColor]"
        )

    light = colours()
    page.execute_cdp_cmd(
        "Emulation.setEmulatedMedia",
        {"features": [{"name": "prefers-color-scheme", "value": "dark"}]},
    )
    dark = colours()
    assert dark[0] != light[0] and dark[1] != light[1]
    page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print", "features": []})
    assert colours() == ["rgb(0, 0, 0)", "rgb(255, 255, 255)"]
    assert not page.find_element("id", "view-in").is_displayed()
    page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "", "features": []})
    page.set_window_size(420, 900)
    # Nothing but tables, which scroll by themselves, is wider than the window.
    assert page.execute_script(
        "return document.documentElement.scrollWidth <= window.innerWidth + 1"
    )
    page.set_window_size(1100, 1400)
