"""The report: one page, no request, everything labelled, the same on repeat."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from itertools import pairwise

import numpy as np
import pytest

from oracles.tables import mie_table
from scatterloom.figures.make import make_figures
from scatterloom.figures.picture import read_index
from scatterloom.figures.report import effort_rows, report
from scatterloom.scattering.audit_table import audit_table

ASKED = {"f11_relative": 0.02, "ratio_absolute": 0.02, "efficiency_relative": 0.02}
VOID = {"meta", "link", "img", "br", "hr", "input"}


class Page(HTMLParser):
    """Checks nesting and collects what the tests ask about."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: list[tuple[str, dict]] = []
        self.text: list[str] = []
        self.feed(text)
        assert self.open == []

    def handle_starttag(self, tag, attrs) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data) -> None:
        self.text.append(data)

    def all(self, tag: str) -> list[dict]:
        return [attributes for name, attributes in self.tags if name == tag]


@pytest.fixture(scope="module")
def table():
    out = mie_table(
        radius_um=np.geomspace(0.05, 0.3, 8),
        angles_deg=np.arange(0.0, 181.0, 6.0),
        indices={"dark": 1.55 + 0.05j},
    )
    out.attrs["title"] = "Silt & <salt>"
    return out


@pytest.fixture(scope="module")
def page(table, tmp_path_factory):
    folder = tmp_path_factory.mktemp("figures")
    make_figures(table, folder)
    return render(table, folder), folder


def render(table, folder) -> str:
    return report(table, audit_table(table, ASKED), folder, read_index(folder, "0" * 64))


def test_the_page_requests_nothing(page) -> None:
    html = page[0]
    parsed = Page(html)
    for tag, attributes in parsed.tags:
        assert tag not in {"iframe", "object", "embed", "base"}
        for name in ("src", "href", "srcset", "action", "poster", "data"):
            value = attributes.get(name, "#")
            assert value.startswith(("#", "data:")), (tag, name, value[:40])
    style = html[html.index("<style>") : html.index("</style>")]
    assert "url(" not in style and "@import" not in style
    # The name of a language, which is no address to load from, is all that looks like one.
    assert set(re.findall(r"https?://[^\"' ;]*", html)) == {"http://www.w3.org/2000/svg"}
    (policy,) = [a["content"] for a in parsed.all("meta") if "http-equiv" in a]
    assert policy.startswith("default-src 'none';") and "http" not in policy


def test_the_page_is_well_formed_and_accessible(page) -> None:
    parsed = Page(page[0])
    assert parsed.all("html")[0]["lang"] == "en"
    images = parsed.all("img")
    assert len(images) == 6
    assert all(len(image["alt"]) > 60 for image in images)
    identifiers = [a["id"] for _, a in parsed.tags if "id" in a]
    assert len(identifiers) == len(set(identifiers))
    links = [a["href"][1:] for a in parsed.all("a")]
    assert len(links) >= 7 and set(links) <= set(identifiers)
    levels = [int(tag[1]) for tag, _ in parsed.tags if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1 and levels.count(1) == 1
    assert all(b - a <= 1 for a, b in pairwise(levels))
    assert all("scope" in a for a in parsed.all("th"))
    assert len(parsed.all("details")) == len(images) + 1  # numbers of each figure, configuration


def test_text_of_the_campaign_is_escaped(page) -> None:
    assert "Silt &amp; &lt;salt&gt;" in page[0]
    assert "<salt>" not in page[0]


def test_the_page_says_what_matters(page, table) -> None:
    text = " ".join(" ".join(Page(page[0]).text).split())
    assert "Model values." in text
    assert "local codes" in text and "licensed practitioners" in text
    assert "Limits of validity" in text
    assert "all 16 cells of the table are solved" in text
    assert "F44 = F11 - 2 F22 at 180 deg" in text
    assert table.attrs["content_digest"] in text
    assert "wavelengths_um: [0.55, 1.1]" in text


def test_the_page_is_the_same_on_repeat(page, table) -> None:
    html, folder = page
    assert render(table, folder) == html


def test_failures_are_on_the_first_screen(table, tmp_path) -> None:
    bad = table.copy(deep=True)
    bad["status"][0, 0, 2] = 3
    bad["scattering_matrix"][0, 0, 2] = np.nan
    bad["status"][0, 1, 2] = 2
    bad["warning_flags"][0, 1, 2] = 2
    bad["scattering_matrix"][0, 0, 4, 0, 0, 1] = 0.5
    make_figures(bad, tmp_path)
    text = " ".join(" ".join(Page(render(bad, tmp_path)).text).split())
    assert "Not everything passed:" in text
    assert "of 16 cells, 14 are solved, 1 solved with a warning, 1 failed and 0 missing" in text
    assert "accuracy not met: 1 cells" in text


def test_effort_is_weighted_by_waves(table) -> None:
    weighted = table.copy(deep=True)
    weighted["wave_count"][0, :, :4] = 0
    weighted["products"][0, :, 4:] = 5.0
    row = effort_rows(weighted)[0]
    assert row["saved"] == pytest.approx(0.75)
    assert row["cases"] == 16
    assert row["warm"] == 14  # anchors at 0 keep 20 products
