"""The schema and the reference page are up to date, complete, and agree with the model."""

import json
from pathlib import Path

import jsonschema
import pytest
from ruamel.yaml import YAML

from campaign.bad_configs import EDITS, GOOD, edited
from scatterloom.campaign import load
from scatterloom.campaign.keys import follow, schema
from scatterloom.campaign.reference import (
    PAGE_FILE,
    ROOT,
    SCHEMA_FILE,
    page_text,
    schema_text,
)
from scatterloom.campaign.sections import UNIT_NAMES

CAMPAIGNS = sorted((ROOT / "config").glob("*.yaml"))


@pytest.mark.parametrize(("name", "made"), [(SCHEMA_FILE, schema_text), (PAGE_FILE, page_text)])
def test_no_drift(name: Path, made):
    advice = "run `python -m scatterloom.campaign.reference` and commit the result"
    assert (ROOT / name).read_text(encoding="utf-8") == made(), advice


def described(node, path=""):
    """Yield every key of the schema with its path."""
    for name, inner in node.get("properties", {}).items():
        yield f"{path}.{name}", inner


def test_every_key_is_described_with_its_unit():
    sections = [schema(), *schema()["$defs"].values()]
    keys = [entry for node in sections for entry in described(node, node["title"])]
    assert len(keys) > 50
    for path, raw in keys:
        assert raw.get("description"), path
        node = follow(raw)
        node = follow(node["items"]) if node.get("type") == "array" else node
        if node.get("type") in ("number", "integer"):
            assert node["unit"] in UNIT_NAMES, path
            limits = {"minimum", "maximum", "exclusiveMinimum", "exclusiveMaximum"}
            assert limits & set(node), path


def test_every_key_is_on_the_page():
    page = page_text()
    for section in [schema(), *schema()["$defs"].values()]:
        for name in section.get("properties", {}):
            assert f"| `{name}` |" in page


@pytest.mark.parametrize("path", CAMPAIGNS, ids=lambda path: path.name)
def test_campaigns_of_the_checkout(path):
    """They load without warnings, and an independent validator accepts them."""
    assert load(path).warnings == ()
    tree = YAML(typ="safe", pure=True).load(path)
    jsonschema.Draft202012Validator(json.loads(schema_text())).validate(tree)


SEEN_BY_SCHEMA = [
    "unknown top key",
    "unknown key in section",
    "missing top key",
    "number as text",
    "true is no number",
    "aspect out of range",
    "negative absorption",
    "unknown kind",
    "campaign name",
    "empty list",
    "ratio of one",
    "angle too large",
    "weight of zero",
]


@pytest.mark.parametrize("name", SEEN_BY_SCHEMA)
def test_editors_see_the_same_faults(name):
    validator = jsonschema.Draft202012Validator(json.loads(schema_text()))
    yaml = YAML(typ="safe", pure=True)
    assert validator.is_valid(yaml.load(GOOD))
    assert not validator.is_valid(yaml.load(edited(*EDITS[name])))
