"""Look keys up in the JSON schema of the model: what is known, what is expected where."""

from __future__ import annotations

import re
from collections.abc import Sequence
from functools import cache
from typing import Any

from scatterloom.campaign.model import CampaignModel
from scatterloom.campaign.sections import UNIT_NAMES

Node = dict[str, Any]
"""A part of a JSON schema."""


@cache
def schema() -> Node:
    """Return the JSON schema of a campaign file."""
    return CampaignModel.model_json_schema()


def follow(node: Node) -> Node:
    """Replace a reference, or a choice between something and null, by what it stands for."""
    if "$ref" in node:
        target = schema()["$defs"][node["$ref"].rsplit("/", 1)[1]]
        return {**follow(target), **{k: v for k, v in node.items() if k != "$ref"}}
    if "anyOf" in node:
        options = [option for option in node["anyOf"] if option.get("type") != "null"]
        if len(options) == 1:
            rest = {k: v for k, v in node.items() if k != "anyOf"}
            return follow({**options[0], **rest})
    return node


def choices(node: Node) -> dict[str, Node]:
    """Return the options of a union by tag; empty if the node is no union."""
    mapping: dict[str, str] = node.get("discriminator", {}).get("mapping", {})
    if mapping:
        return {tag: follow({"$ref": reference}) for tag, reference in mapping.items()}
    branches: list[Node] = node.get("anyOf") or node.get("oneOf") or []
    options = [follow(option) for option in branches]
    return {("list" if o.get("type") == "array" else "rule"): o for o in options}


def locate(location: Sequence[str | int]) -> tuple[tuple[str | int, ...], Node | None]:
    """Follow a pydantic error location; return the path in the file and the schema there.

    Pydantic names the chosen option of a union in the location; the path has no such part.
    The node is None where the schema knows no such key.
    """
    path: list[str | int] = []
    node: Node | None = follow(schema())
    for part in location:
        if node is None:
            path.append(part)
            continue
        options = choices(node)
        if options:
            if part in options:
                node = options[str(part)]
                continue
            node = None
        elif isinstance(part, int):
            node = node.get("items")
        elif "properties" in node:
            node = node["properties"].get(part)
        else:
            inner = node.get("additionalProperties")
            node = inner if isinstance(inner, dict) else None
        path.append(part)
        node = follow(node) if node else None
    return tuple(path), node


def short(value: float) -> str:
    """Write a number briefly: 0.25, 1e6, 1e-6."""
    return re.sub(r"e([+-])0*", lambda sign: "e" + sign[1].strip("+"), f"{value:g}")


def bounds(node: Node) -> str:
    """Say the bounds of a number, such as "from 0.1 to 10", or nothing."""
    low, high = node.get("minimum"), node.get("maximum")
    above, below = node.get("exclusiveMinimum"), node.get("exclusiveMaximum")
    if low is not None and high is not None:
        return f"from {short(low)} to {short(high)}"
    limits = {"at least": low, "above": above, "at most": high, "below": below}
    given = [f"{word} {short(value)}" for word, value in limits.items() if value is not None]
    return " and ".join(given)


def expected(node: Node, plural: bool = False) -> str:
    """Say in words what a value must be: kind, bounds and unit."""
    if "form" in node:
        return node["form"]
    options = choices(node)
    if options:
        tags = ", ".join(f"'{tag}'" for tag in options)
        if "discriminator" in node:
            return f"a mapping with a key '{node['discriminator']['propertyName']}', one of {tags}"
        return " or ".join(expected(option) for option in options.values())
    if "const" in node:
        return f"'{node['const']}'"
    if "enum" in node:
        return "one of " + ", ".join(f"'{word}'" for word in node["enum"])
    kind = node.get("type")
    if kind in ("number", "integer"):
        noun = {"number": "number", "integer": "whole number"}[kind]
        words = [f"{noun}s" if plural else f"a {noun}", bounds(node)]
        if unit := UNIT_NAMES[node["unit"]]:
            words.append(f"in {unit}" if unit == "um" else unit)
        return " ".join(word for word in words if word)
    if kind == "array":
        low, high = node.get("minItems", 0), node.get("maxItems")
        number = f"{low} " if low == high else f"{low} to {high} " if high else ""
        return f"a list of {number}{expected(follow(node['items']), plural=True)}"
    if kind == "object":
        if "properties" in node:
            listed = ", ".join(f"'{key}'" for key in node["properties"])
            keys = "key" if len(node["properties"]) == 1 else "keys"
            return f"{'mappings' if plural else 'a mapping'} with the {keys} {listed}"
        inner = expected(follow(node["additionalProperties"]))
        return f"a mapping of names, each to {inner}"
    low, high = node.get("minLength"), node.get("maxLength")
    if low and high:
        return f"text of {low} to {high} characters"
    return "text"


def written(path: Sequence[str | int]) -> str:
    """Write a path as users read it: `particles[0].shape.kind`."""
    text = ""
    for part in path:
        text += f"[{part}]" if isinstance(part, int) else f".{part}" if text else str(part)
    return text
