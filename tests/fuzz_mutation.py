"""Good files with a few things changed."""

from __future__ import annotations

import json
from copy import deepcopy
from typing import Any

from hypothesis import strategies as st

VALUES: tuple[Any, ...] = (
    *(None, True, "", "a", "../a", "nan", "\0", "\u202e", -1, 0, 1e308, 2**70, float("nan")),
    *(float("inf"), [], {}, [[]], {"a": 1}, "9" * 5000),
)
PIECES = (b"", b"\0", b"\xff", b"-1", b"1e999", b"nan", b"[" * 2000, b"{", b'"', b",", b"\n", b"#")


@st.composite
def mutated(draw: st.DrawFn, good: list[bytes]) -> bytes:
    """Bytes cut, replaced or doubled; in JSON, values replaced, removed or moved as well."""
    content = draw(st.sampled_from(good))
    if draw(st.booleans()):
        try:
            tree = json.loads(content)
        except ValueError:
            pass
        else:
            for _ in range(draw(st.integers(1, 3))):
                _change(draw, tree)
            return json.dumps(tree).encode()
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(content)))
        end = draw(st.integers(start, min(len(content), start + 8)))
        piece = draw(st.one_of(st.sampled_from(PIECES), st.binary(max_size=4)))
        content = content[:start] + piece + content[end:]
    return content


def _change(draw: st.DrawFn, tree: Any) -> None:
    """Change one value, somewhere in a tree of JSON."""
    while isinstance(tree, dict | list) and tree:
        keys = sorted(tree) if isinstance(tree, dict) else range(len(tree))
        key = draw(st.sampled_from(list(keys)))
        inner = tree[key]
        if isinstance(inner, dict | list) and inner and draw(st.integers(0, 3)):
            tree = inner
            continue
        if draw(st.integers(0, 4)):
            tree[key] = deepcopy(draw(st.sampled_from(VALUES)))
        else:
            del tree[key]
        return
