"""The documents say what is there: links, commands, variables, flags; and the rooms keep order."""

import ast
import json
import re
import sys
import tomllib
from functools import lru_cache
from importlib import import_module
from pathlib import Path

import numpy as np
import pytest
from ruamel.yaml import YAML

from scatterloom.campaign import load
from scatterloom.commands import COMMANDS
from scatterloom.errors import BadInput
from scatterloom.scattering.record import FLAGS
from scatterloom.store import schema

ROOT = Path(__file__).parents[1]
# The benchmarks are no part of the package.
sys.path.append(str(ROOT / "scripts"))
validation_page = import_module("benchmarks.validation_page")
PACKAGE = ROOT / "workflow" / "scatterloom"
RESULTS = ROOT / "workflow" / "docs" / "benchmarks"
UNSEEN = {".venv", ".git", ".snakemake", "results", ".pytest_cache", ".hypothesis"}
ROOMS = (
    "solids",
    "campaign",
    "particle",
    "dipole",
    "waves",
    "solve",
    "transition",
    "orientation",
    "scattering",
    "store",
    "bulk",
    "figures",
)
FREE = {"errors"}
"""Modules beside the rooms that every room may import."""
ABOVE = {
    "attempts",
    "singles",
    "cli",
    "commands",
    "crate",
    "graph",
    "job_file",
    "jobs",
    "limits",
    "mending",
    "outline",
    "pace",
    "preview",
    "resolve",
    "unpacking",
    "__main__",
}
"""Modules beside the rooms that may import all of them."""

PAGES = sorted(
    path
    for path in ROOT.rglob("*.md")
    if not UNSEEN & set(path.relative_to(ROOT).parts) and path.parent != ROOT / "results"
)


def name_of(path):
    return str(path.relative_to(ROOT))


@lru_cache(maxsize=64)
def text_of(path):
    return path.read_text(encoding="utf-8")


def without_code(text):
    return re.sub(r"`[^`\n]*`", "", re.sub(r"^```.*?^```", "", text, flags=re.M | re.S))


def anchors(text):
    """Anchors of the headings, as code forges make them."""
    titles = re.findall(r"^#+ +(.+)$", re.sub(r"^```.*?^```", "", text, flags=re.M | re.S), re.M)
    return {re.sub(r"[^\w\- ]", "", title.lower()).replace(" ", "-") for title in titles}


def section(text, marker):
    """Text between two comments that name a part of a page."""
    found = re.search(rf"<!-- {marker}.*?-->(.*?)<!-- end of {marker} -->", text, re.S)
    assert found, f"no part marked {marker}"
    return found.group(1)


def test_pages_are_found():
    names = {name_of(path) for path in PAGES}
    wanted = {"README.md", "DEVELOPERS.md", "config/README.md", "workflow/docs/method.md"}
    assert wanted <= names


def links(page):
    """Targets of the links and pictures of a page that lead into the checkout."""
    targets = re.findall(r"\]\(([^)\s]+)\)", without_code(text_of(page)))
    return [target for target in targets if not re.match(r"[a-z]+:", target)]


def resolves(page, target):
    path, _, fragment = target.partition("#")
    place = (page.parent / path).resolve() if path else page
    if not place.exists() or not place.is_relative_to(ROOT):
        return False
    return not fragment or fragment in anchors(text_of(place))


def test_broken_links_are_noticed():
    page = ROOT / "README.md"
    assert len(links(page)) > 20
    assert resolves(page, "workflow/docs/limits.md") and resolves(page, "README.md#limits")
    for target in ("workflow/docs/missing.md", "README.md#missing", "../outside.md", "#nowhere"):
        assert not resolves(page, target)


@pytest.mark.parametrize("page", PAGES, ids=name_of)
def test_links_and_pictures_resolve(page):
    broken = [target for target in links(page) if not resolves(page, target)]
    assert not broken


@pytest.mark.parametrize("page", PAGES, ids=name_of)
def test_commands_named_exist(page):
    code = re.findall(r"^```.*?^```|`[^`\n]+`", text_of(page), re.M | re.S)
    named = set(
        re.findall(r"(?<![\w/-])(?:\.venv/bin/)?scatterloom +([a-z][a-z-]*)", " ".join(code))
    )
    assert named <= set(COMMANDS), named - set(COMMANDS)
    scripts = set(re.findall(r"scripts/[a-z_-]+(?:\.py)?", " ".join(code)))
    assert all((ROOT / script).exists() for script in scripts), scripts


def test_readme_opens_with_the_job_and_the_two_commands():
    title, paragraph, commands = text_of(ROOT / "README.md").split("\n\n")[:3]
    assert title == "# Scatterloom"
    assert not paragraph.startswith(("#", "-", "|", "!", "<"))
    assert "bash scripts/run" in commands and "bash scripts/test" in commands


def test_readme_lists_every_command_of_users():
    listed = set(re.findall(r"^\| `scatterloom ([a-z-]+)", text_of(ROOT / "README.md"), re.M))
    # The rule graph calls these; users need not know them.
    assert listed == set(COMMANDS) - {"gather", "solve-job", "solve-single"}


def test_readme_lists_exactly_the_variables_of_a_table():
    rows = section(text_of(ROOT / "README.md"), "table-variables").strip().splitlines()[2:]
    listed = {
        name: row.split("|")[2]
        for row in rows
        for name in re.findall(r"`(\w+)`", row.split("|")[1])
    }
    variables = {v.name: v for v in schema.variables(FLAGS)}
    assert set(listed) == set(variables)
    for name, dimensions in listed.items():
        if dimensions.strip() != "one each":
            assert tuple(dimensions.strip().split(", ")) == variables[name].dims, name


def test_every_warning_flag_is_documented():
    rows = section(text_of(ROOT / "workflow/docs/file_format.md"), "warning-flags")
    listed = {name: int(bit) for name, bit in re.findall(r"^\| `(\w+)` \| (\d+) \|", rows, re.M)}
    assert listed == {name: bit for name, (bit, _) in FLAGS.items()}


def test_campaign_of_the_tutorial_and_its_message(tmp_path):
    text = text_of(ROOT / "workflow/docs/tutorial.md")
    campaign = re.search(r"^```yaml\n(.*?)^```", text, re.M | re.S).group(1)
    file = tmp_path / "grains.yaml"
    file.write_text(campaign)
    loaded = load(file)
    assert loaded.name == "grains" and not loaded.warnings
    file.write_text(campaign.replace("radius_um: {from", "raduis_um: {from"))
    with pytest.raises(BadInput) as caught:
        load(file)
    said = str(caught.value).replace(str(file), "config/grains.yaml")
    assert said in text


def test_citation_file():
    citation = YAML(typ="safe").load(text_of(ROOT / "CITATION.cff"))
    # Required by the Citation File Format, version 1.2.0.
    assert {"cff-version", "message", "title", "authors"} <= set(citation)
    assert citation["cff-version"] == "1.2.0"
    assert citation["authors"] == [{"name": "The Scatterloom developers"}]
    project = tomllib.loads(text_of(ROOT / "pyproject.toml"))["project"]
    assert citation["version"] == project["version"]
    assert citation["license"] == project["license"]


def test_licences_of_all_direct_dependencies_are_listed():
    project = tomllib.loads(text_of(ROOT / "pyproject.toml"))["project"]
    page = text_of(ROOT / "workflow/docs/licences.md")
    needed = project["dependencies"] + project["optional-dependencies"]["develop"]
    for requirement in needed:
        name = re.match(r"[\w.-]+", requirement).group().replace(".", "-").lower()
        assert f"| {name} |" in page, name


def benchmark(name):
    """Rows of a benchmark as it was last measured."""
    return json.loads(text_of(RESULTS / f"{name}.json"))["rows"]


def signed(value, digits):
    return f"{value:.{digits}f}".replace("-", "\N{MINUS SIGN}")


def test_figures_quoted_are_those_last_measured():
    readme = text_of(ROOT / "README.md")
    ways = {(row["way"], row["cells_across"]): row for row in benchmark("solve")}
    lattices = "12+16+24"
    cold, infill = ways["cold block", lattices], ways["in-fill", lattices]
    textbook = ways["textbook", "24"]
    qext, rms, ratio = (
        signed(cold["Qext_error_percent"], 2) + " %",
        f"{cold['F11_rms_percent']:.2f} %",
        f"{cold['worst_ratio_error']:.3f}",
    )
    assert f"| extinction efficiency | {qext} |" in readme
    assert f"| F11, root mean square over angle | {rms} |" in readme
    assert f"| any ratio Fij/F11, worst angle | {ratio} |" in readme
    for row in (cold, infill):
        line = f"| {row['packed_products']}, each serving 16 waves | {row['seconds_solving']:.2f} |"
        assert f"{line} {row['F11_rms_percent']:.2f} % |" in readme
    line = f"| {textbook['packed_products']} | {textbook['seconds_solving']:.1f} |"
    assert f"{line} {textbook['F11_rms_percent']:.1f} % |" in readme


def test_figures_quoted_of_transforms_are_those_last_measured():
    page = " ".join(text_of(ROOT / "workflow/docs/transforms.md").split())
    gain = {
        kind: np.median(
            [
                r["scipy / ducc0, in place"]
                for r in benchmark("transforms")
                if r["precision"] == kind
            ]
        )
        for kind in ("complex64", "complex128")
    }
    assert f"by a factor of {gain['complex64']:.1f} in single precision" in page
    assert f"and {gain['complex128']:.1f} in double precision" in page
    share = [row["ours / library transforms"] for row in benchmark("product")]
    assert f"takes {min(share):.1f} to {max(share):.1f} times what the bare transforms" in page


def test_calibration_quoted_is_that_last_measured():
    quantities = benchmark("calibration")
    regimes = json.loads(text_of(RESULTS / "calibration.json"))["more"]["by regime"]
    whole = quantities[-1]
    lowest = min(regimes, key=lambda row: row["inside_percent"])
    readme = " ".join(text_of(ROOT / "README.md").split())
    assert f"counted on {whole['cases']} random cases" in readme
    assert f"for {whole['inside_percent']:.1f} % of all values" in readme
    assert f'for {lowest["inside_percent"]:.1f} %, in the regime "{lowest["regime"]}"' in readme
    assert f"median bar is {whole['median of bar / error']:.1f} times the true error" in readme


def test_validation_page_is_made_of_the_results():
    assert text_of(ROOT / "workflow/docs/validation.md") == validation_page.render(RESULTS)


SOURCES = sorted(PACKAGE.rglob("*.py"))


@pytest.mark.parametrize("file", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_files_are_short(file):
    assert len(text_of(file).splitlines()) <= 400


def parts_imported(file):
    """First part below the package of everything a file imports from it, wherever in the file."""
    inside = ("scatterloom", *file.relative_to(PACKAGE).parent.parts)
    modules = []
    for node in ast.walk(ast.parse(text_of(file))):
        if isinstance(node, ast.Import):
            modules += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            base = ".".join(inside[: len(inside) - node.level + 1]) if node.level else ""
            module = ".".join(part for part in (base, node.module) if part)
            if module == "scatterloom":
                modules += [f"scatterloom.{alias.name}" for alias in node.names]
            else:
                modules.append(module)
    return {m.split(".")[1] for m in modules if m.startswith("scatterloom.")} - {"__version__"}


def test_every_part_of_the_package_has_its_place():
    found = {
        p.stem if p.suffix == ".py" else p.name for p in PACKAGE.iterdir() if p.suffix != ".typed"
    }
    assert found - {"__pycache__", "__init__"} == {*ROOMS, *FREE, *ABOVE}


@pytest.mark.parametrize("room", ROOMS)
def test_rooms_import_only_earlier_rooms(room):
    allowed = {*ROOMS[: ROOMS.index(room) + 1], *FREE}
    wrong = {
        str(file.relative_to(PACKAGE)): sorted(parts_imported(file) - allowed)
        for file in (PACKAGE / room).rglob("*.py")
        if parts_imported(file) - allowed
    }
    assert not wrong


def test_imports_are_recognized(tmp_path, monkeypatch):
    monkeypatch.setattr(f"{__name__}.PACKAGE", tmp_path)
    (tmp_path / "store").mkdir()
    file = tmp_path / "store" / "odd.py"
    file.write_text(
        "import scatterloom.bulk.average\n"
        "from scatterloom import figures, __version__\n"
        "from ..solve import block\n"
        "from . import atomic\n"
        "def late():\n    from scatterloom.waves.basis import wave_basis\n"
        "import numpy\n"
    )
    assert parts_imported(file) == {"bulk", "figures", "solve", "store", "waves"}
