"""Write the JSON schema and the key-by-key reference page from the model.

`python -m scatterloom.campaign.reference` writes both into the checkout; a test fails if
they are out of date.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from scatterloom.campaign.keys import Node, bounds, choices, follow, schema, short

ROOT = Path(__file__).parents[3]
SCHEMA_FILE = Path("workflow/schemas/campaign.schema.json")
PAGE_FILE = Path("config/README.md")

_INTRODUCTION = """\
<!-- Made by `python -m scatterloom.campaign.reference`; edit the model, not this page. -->
# The campaign file

A campaign is one YAML 1.2 file; [demo.yaml](demo.yaml) is an example with comments. Check a
file with `scatterloom check FILE`: it reports every problem at once, by line and column.
Unknown keys, keys given twice, values out of range and text where a number belongs are errors;
nothing is guessed. Editors that know JSON Schema complete and check the keys if the file starts
with

```yaml
# yaml-language-server: $schema=../workflow/schemas/campaign.schema.json
```

Lengths are in micrometres and angles in degrees, as the names of the keys say. A case is
identified by its shape, relative refractive index, size parameter, the accuracy asked and the
overrides `solver.levels` and `solver.tolerance`; editing anything else never solves it again.

A unit of 1 means a number without unit.
"""

_TABLES = """\
## Tables of optical constants

The file that `materials.NAME.table` names is CSV with the header `wavelength_um,n,k`; lines
that start with `#` are comments. Wavelengths ascend, k is positive where the material absorbs.
Between rows n and k are interpolated linearly in the logarithm of wavelength; outside them
nothing is extrapolated, so the rows must enclose every wavelength of the campaign. Metals
(k not below n) are refused: the averaging of permittivity in the cells that a boundary cuts
is not reliable for them.

## Tables of size distributions

The file that the `table` of a tabulated distribution names is CSV with the header
`radius_um,density`; radii ascend, densities are zero or more, on any scale. Densities are taken
per unit of the logarithm of radius unless `per: radius` is given, and count particles unless `by`
says otherwise. Between rows the density per ln r is linear in ln r; outside them there is nothing.
"""


def schema_text() -> str:
    """Return the JSON schema of a campaign file as text."""
    head = {"$schema": "https://json-schema.org/draft/2020-12/schema"}
    content = _untitled({**head, **schema(), "title": "Scatterloom campaign"})
    content["title"] = "Scatterloom campaign"
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def page_text() -> str:
    """Return the reference page as Markdown."""
    top = follow(schema())
    lines = [_INTRODUCTION, "## Top level\n", *_table(top)]
    kinds: set[str] = set()
    for name, node in top["properties"].items():
        for path, section in _sections(name, follow(node)):
            # What one of several keys may hold is the same for all of them: say it once.
            if section["title"] in kinds and (".NAME" in path or "(kind" in path):
                continue
            kinds.add(section["title"])
            lines += [f"## `{path}`\n", _sentence(section), "", *_table(section)]
    lines.append(_TABLES)
    return "\n".join(lines)


def _sections(path: str, node: Node) -> Iterator[tuple[str, Node]]:
    """Find the sections below a key, each with the path that leads to it."""
    options = choices(node)
    if "discriminator" in node:
        key = node["discriminator"]["propertyName"]
        for tag, option in options.items():
            yield f"{path} ({key}: {tag})", option
            for name, raw in option["properties"].items():
                listed = follow(raw)
                if listed.get("type") == "array":
                    yield from _sections(f"{path}.{name}", listed)
        return
    for option in options.values() if options else [node]:
        if option.get("type") == "array":
            item = follow(option["items"])
            if item.get("type") == "object":
                yield from _sections(f"{path}[]", item)
        elif "properties" in option:
            yield (f"{path} (as a rule)" if options else path), option
            for name, inner in option["properties"].items():
                yield from _sections(f"{path}.{name}", follow(inner))
        elif isinstance(inner := option.get("additionalProperties"), dict):
            yield from _sections(f"{path}.NAME", follow(inner))


def _sentence(section: Node) -> str:
    reference = schema()["$defs"].get(section.get("title", ""), section)
    return str(reference.get("description", ""))


def _table(section: Node) -> list[str]:
    lines = ["| key | type | unit | range | default | meaning |", "|---|---|---|---|---|---|"]
    required = section.get("required", [])
    for name, raw in section["properties"].items():
        node = follow(raw)
        default = "required" if name in required else _default(raw.get("default"))
        cells = [f"`{name}`", _kind(node), _unit(node), _range(node), default]
        lines.append("| " + " | ".join([*cells, str(raw.get("description", ""))]) + " |")
    return [*lines, ""]


def _kind(node: Node) -> str:
    options = choices(node)
    if "discriminator" in node:
        return "mapping"
    if options:
        return " or ".join(_kind(option) for option in options.values())
    match node.get("type"):
        case "array":
            return f"list of {_kind(follow(node['items']))}s"
        case "object":
            return "mapping"
        case "integer":
            return "whole number"
        case "string":
            return "text"
    return str(node.get("type"))


def _unit(node: Node) -> str:
    if node.get("type") == "array":
        node = follow(node["items"])
    elif isinstance(inner := node.get("additionalProperties"), dict):
        node = follow(inner)
    unit = str(node.get("unit", ""))
    return "um or 1, as the key" if unit == "size" else unit


def _range(node: Node) -> str:
    if "const" in node:
        return f"`{node['const']}`"
    if "enum" in node:
        return ", ".join(f"`{word}`" for word in node["enum"])
    if "discriminator" in node:
        return "kinds " + ", ".join(f"`{tag}`" for tag in choices(node))
    if "form" in node:
        return str(node["form"])
    parts = [bounds(node)]
    if "list" in (options := choices(node)):
        return "list: " + _range(options["list"])
    if "maxLength" in node:
        parts.append(f"{node.get('minLength', 0)} to {node['maxLength']} characters")
    low, high = node.get("minItems"), node.get("maxItems")
    if low is not None and low == high:
        parts.append(f"{low} entries")
    elif high is not None:
        parts.append(f"{low or 0} to {high} entries")
    if node.get("type") == "array":
        parts.append(bounds(follow(node["items"])))
    elif isinstance(inner := node.get("additionalProperties"), dict):
        parts.append(bounds(follow(inner)))
    return ", ".join(part for part in parts if part)


def _default(value: Any) -> str:
    if value is None:
        return "none"
    if isinstance(value, dict):
        return "its defaults"
    if value == []:
        return "empty"
    return short(value) if isinstance(value, float) else str(value)


def _untitled(node: Any, names: bool = False) -> Any:
    """Drop the titles that only repeat names; `names` marks mappings of names to schemas."""
    if isinstance(node, dict):
        kept = {k: v for k, v in node.items() if names or k != "title" or not isinstance(v, str)}
        return {
            k: _untitled(v, names=not names and k in ("properties", "$defs"))
            for k, v in kept.items()
        }
    if isinstance(node, list):
        return [_untitled(entry) for entry in node]
    return node


def main() -> None:
    """Write both files into the checkout."""
    for name, text in ((SCHEMA_FILE, schema_text()), (PAGE_FILE, page_text())):
        path = ROOT / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
        print(path)


if __name__ == "__main__":
    main()
