"""Turn the model's validation errors into messages with position, finding and remedy."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from scatterloom.campaign.document import Document, KeyPath
from scatterloom.campaign.keys import choices, expected, locate, written
from scatterloom.errors import Problem


def complaints(error: ValidationError, document: Document) -> list[Problem]:
    """Return one `Problem` for each error of the model."""
    return [_complain(detail, document) for detail in error.errors(include_url=False)]


def nearest(word: str, known: Iterable[str]) -> str:
    """Return a hint that names the nearest known word, or all of them."""
    known = list(known)
    folded = {name.lower(): name for name in known}
    close = difflib.get_close_matches(word.lower(), list(folded), n=1, cutoff=0.6)
    if close:
        return f"did you mean '{folded[close[0]]}'?"
    if not known:
        return "none is defined"
    return "known here: " + ", ".join(f"'{name}'" for name in known)


def _complain(detail: ErrorDetails, document: Document) -> Problem:
    location, kind = detail["loc"], detail["type"]
    context = detail.get("ctx", {})
    path, node = locate(location)
    if kind == "section":
        return _own(path, context["message"], context["hint"], tuple(context["at"]), document)
    if kind == "extra_forbidden":
        return _unknown(path, location, document)
    if kind == "missing":
        place = f" in {written(path[:-1])}" if len(path) > 1 else ""
        return document.problem(
            path[:-1],
            f"missing key '{path[-1]}'{place}",
            hint=_give(expected(node)) if node else None,
        )
    name = written(path) or "the file"
    if node is None:
        return document.problem(path, f"{name}: {detail['msg']}", document.show(path))
    if kind in ("union_tag_invalid", "union_tag_not_found"):
        return _choice(path, kind, str(context.get("tag", "")), document)
    return document.problem(
        path, f"{name} {_fault(kind)}", document.show(path), _give(expected(node), node)
    )


def _own(path: KeyPath, message: str, hint: str, at: KeyPath, document: Document) -> Problem:
    place = (*path, *at)
    name = written(path) or "the file"
    text = message if name in message else f"{name}: {message}"
    # A finding is shown where the culprit is one value; elsewhere the message says it all.
    at_key = bool(at) and isinstance(document.get(place), dict)
    return document.problem(place, text, document.show(place), f"{hint}", at_key=at_key)


def _unknown(path: KeyPath, location: tuple[str | int, ...], document: Document) -> Problem:
    _, parent = locate(location[:-1])
    known = (parent or {}).get("properties", {})
    place = written(path[:-1]) or "the campaign file"
    word = str(path[-1])
    return document.problem(
        path,
        f"unknown key '{word}' in {place}",
        f"{word}: {document.show(path)}",
        nearest(word, known),
        at_key=True,
    )


def _choice(path: KeyPath, kind: str, tag: str, document: Document) -> Problem:
    _, node = _union(path)
    options = choices(node)
    if "discriminator" not in node or not isinstance(document.get(path), dict):
        message = f"{written(path)} has the wrong type"
        return document.problem(path, message, document.show(path), _give(expected(node)))
    key = node["discriminator"]["propertyName"]
    if kind == "union_tag_not_found":
        hint = f"give '{key}' as one of " + ", ".join(f"'{name}'" for name in options)
        return document.problem(path, f"missing key '{key}' in {written(path)}", hint=hint)
    place = (*path, key)
    message = f"{written(place)} is not known"
    return document.problem(place, message, document.show(place), nearest(tag, options))


def _union(path: KeyPath) -> tuple[KeyPath, dict]:
    found, node = locate(path)
    assert node is not None
    return found, node


def _fault(kind: str) -> str:
    if kind.startswith(("greater_than", "less_than")) or kind == "finite_number":
        return "is out of range"
    if kind in ("too_short", "too_long", "string_too_short", "string_too_long"):
        return "has the wrong length"
    if kind in ("string_pattern_mismatch", "literal_error"):
        return "is not allowed"
    return "has the wrong type"


def _give(what: str, node: dict | None = None) -> str:
    advice = f"; {node['advice']}" if node and "advice" in node else ""
    return f"give {what}{advice}"
