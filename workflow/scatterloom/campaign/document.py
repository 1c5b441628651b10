"""Read a YAML 1.2 file into plain values and remember where each of them stands.

Only plain data is accepted: mappings with text keys, lists, numbers, text, booleans
and null. Every fault of the file becomes a `Problem`; duplicate keys are all reported.
"""

from __future__ import annotations

import re
import warnings
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.nodes import MappingNode, Node, ScalarNode, SequenceNode
from ruamel.yaml.reader import ReaderError

from scatterloom.errors import BadInput, Problem, visible

KeyPath = tuple[str | int, ...]
"""Keys and list positions that lead from the top of the document to a value."""

_LARGEST_FILE = 4 * 2**20
_MOST_VALUES = 500_000  # an alias may stand for many values: stop before memory does
_PREFIX = "tag:yaml.org,2002:"
_OTHER_VERSION = re.compile(r"^%YAML[ \t]+(?!1\.2[ \t]*(#|$))", re.MULTILINE)


@dataclass(frozen=True)
class Mark:
    """Where a value stands (line and column from one), and where its key does."""

    line: int
    column: int
    key_line: int
    key_column: int
    text: str | None  # the scalar as written, None for mappings and lists


@dataclass(frozen=True)
class Document:
    """A file of plain values with the position of each of them.

    Attributes
    ----------
    file : str
        File name as the user gave it.
    tree : dict
        The values.
    marks : dict
        `KeyPath` to `Mark`; the empty path is the document itself.
    """

    file: str
    tree: dict[str, Any]
    marks: dict[KeyPath, Mark] = field(repr=False)

    def get(self, path: KeyPath) -> Any:
        """Return the value at `path`, or None if there is none."""
        value: Any = self.tree
        for part in path:
            try:
                value = value[part]
            except (KeyError, IndexError, TypeError):
                return None
        return value

    def problem(
        self,
        path: KeyPath,
        message: str,
        found: str | None = None,
        hint: str | None = None,
        at_key: bool = False,
    ) -> Problem:
        """Make a problem that stands at `path`, or at the nearest value above it."""
        while path not in self.marks:
            path = path[:-1]
        mark = self.marks[path]
        line, column = mark.line, mark.column
        if at_key:
            line, column = mark.key_line, mark.key_column
        return Problem(self.file, line, column, message, found, hint)

    def show(self, path: KeyPath) -> str:
        """Describe the value at `path` in a few words, as it is written in the file."""
        value, mark = self.get(path), self.marks.get(path)
        if mark is None:
            return "nothing"
        if isinstance(value, dict):
            keys = "key" if len(value) == 1 else "keys"
            return f"a mapping with the {keys} {_some(value)}" if value else "an empty mapping"
        if isinstance(value, list):
            return f"a list of {len(value)}" if value else "an empty list"
        if value is None:
            return "nothing"
        if isinstance(value, bool):
            return f"{_clip(mark.text or str(value))} (true or false)"
        if isinstance(value, str):
            return f"{_clip(repr(value))} (text)"
        return _clip(mark.text or repr(value))


def read(path: Path, shown: str) -> Document:
    """Read the YAML file `path`, named `shown` in messages.

    Raises
    ------
    BadInput
        If the file cannot be read or holds anything but plain YAML 1.2 data.
    """
    text = read_text(path, shown, _LARGEST_FILE)
    node = _compose(text, shown)
    builder = _Builder(shown)
    try:
        tree = builder.value(node, (), None)
    except RecursionError:
        raise BadInput([_nested(shown)]) from None
    if not isinstance(tree, dict) and not builder.problems:
        mark = builder.marks[()]
        kind = "a list" if isinstance(tree, list) else "a single value"
        builder.problems.append(
            Problem(
                shown,
                mark.line,
                mark.column,
                "a campaign file is a mapping of keys to values",
                kind,
                "start with a line such as 'campaign: my_campaign'",
            )
        )
    if builder.problems:
        raise BadInput(sorted(builder.problems, key=lambda p: (p.line or 0, p.column or 0)))
    return Document(shown, tree, builder.marks)


def read_text(path: Path, shown: str, largest: int) -> str:
    """Read a whole UTF-8 text file of at most `largest` bytes; faults become `BadInput`."""

    def refuse(message: str, hint: str, line: int | None = None) -> BadInput:
        return BadInput([Problem(shown, line, None, message, hint=hint)])

    try:
        if path.is_dir():
            raise refuse("this is a folder, not a file", "name the file inside it")
        if not path.exists():
            raise refuse("no such file", "check the spelling and the folder you are in")
        if not path.is_file():
            raise refuse("this is not a regular file", "name a file on disk")
        if path.stat().st_size > largest:
            raise refuse(f"the file is larger than {largest // 2**20} MiB", "is it the right file?")
        raw = path.read_bytes()
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise refuse(f"cannot be read: {reason}", "check the name and permissions") from None
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        message = f"not UTF-8 text (byte 0x{raw[error.start]:02x})"
        raise refuse(message, "save the file with UTF-8 encoding", line) from None


def _compose(text: str, shown: str) -> Node:
    if not text.strip():
        raise BadInput(
            [Problem(shown, None, None, "the file is empty", hint="config/demo.yaml is an example")]
        )
    if version := _OTHER_VERSION.search(text):
        line = text.count("\n", 0, version.start()) + 1
        raise BadInput(
            [Problem(shown, line, 1, "only YAML 1.2 is read", hint="remove the %YAML line")]
        )
    yaml = YAML(typ="safe", pure=True)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # re-used anchors: the later one holds, as YAML says
            node = yaml.compose(text)
    except MarkedYAMLError as error:
        raise BadInput([_syntax(error, text, shown)]) from None
    except ReaderError as error:
        line = text.count("\n", 0, error.position) + 1
        column = error.position - (text.rfind("\n", 0, error.position) + 1) + 1
        message = f"character U+{ord(text[error.position]):04X} is not allowed in YAML"
        raise BadInput([Problem(shown, line, column, message, hint="remove it")]) from None
    except RecursionError:
        raise BadInput([_nested(shown)]) from None
    except (YAMLError, ValueError, IndexError, KeyError, AttributeError, TypeError) as error:
        # The last four are faults of the YAML library on malformed text, not of this program.
        reason = _clip(str(error) or type(error).__name__)
        raise BadInput([Problem(shown, None, None, f"not YAML: {reason}")]) from None
    if node is None:
        hint = "config/demo.yaml is an example"
        raise BadInput([Problem(shown, None, None, "the file holds only comments", hint=hint)])
    return node


def _syntax(error: MarkedYAMLError, text: str, shown: str) -> Problem:
    mark = error.problem_mark or error.context_mark
    reason = error.problem or "cannot be read"
    line, column = (mark.line + 1, mark.column + 1) if mark else (None, None)
    lines = text.split("\n")
    written = lines[line - 1] if line and line <= len(lines) else ""
    indent = written[: len(written) - len(written.lstrip())]
    if "\t" in indent or "'\\t'" in reason:
        hint = "indent with spaces, never with tabs"
        return Problem(shown, line, column, "a tab cannot indent YAML", hint=hint)
    if "expected a single document" in (error.context or "") + reason:
        hint = "keep one document; remove the line '---' between them"
        return Problem(shown, line, column, "the file holds several documents", hint=hint)
    if "undefined alias" in reason:
        hint = "put text that starts with * in quotes"
        return Problem(shown, line, column, f"not YAML: {_clip(reason)}", hint=hint)
    hint = "look at this line and the one above for a missing colon, quote or bracket"
    context = f" {error.context}" if error.context else ""
    opened = error.context_mark
    if context and opened and line and opened.line + 1 != line:
        context += f" that starts in line {opened.line + 1}"
    return Problem(shown, line, column, f"not YAML: {_clip(reason + context, 140)}", hint=hint)


def _nested(shown: str) -> Problem:
    return Problem(shown, None, None, "nested too deeply", hint="a campaign file needs six levels")


class _Builder:
    """Turns the node graph into plain values and collects marks and problems."""

    def __init__(self, shown: str) -> None:
        self.shown = shown
        self.marks: dict[KeyPath, Mark] = {}
        self.problems: list[Problem] = []
        self._constructor = YAML(typ="safe", pure=True).constructor
        self._open: list[Node] = []  # nodes being built: an alias to one of them is a loop

    def value(self, node: Node, path: KeyPath, key: Node | None) -> Any:
        start, key_start = node.start_mark, (key or node).start_mark
        text = node.value if isinstance(node, ScalarNode) else None
        self.marks[path] = Mark(
            start.line + 1, start.column + 1, key_start.line + 1, key_start.column + 1, text
        )
        if len(self.marks) > _MOST_VALUES:
            hint = "write long lists as {from, to, ratio}, and use few aliases"
            raise BadInput([Problem(self.shown, None, None, "too many values", hint=hint)])
        if any(node is other for other in self._open):
            self._refuse(node, "an alias refers to the value it stands in", "write it out")
            return None
        if isinstance(node, ScalarNode):
            return self._scalar(node)
        if str(node.tag) not in (_PREFIX + "map", _PREFIX + "seq"):
            self._refuse(node, f"tag {_clip(str(node.tag))} is not plain data", "remove the tag")
            return None
        self._open.append(node)
        try:
            if isinstance(node, SequenceNode):
                return [
                    self.value(child, (*path, position), None)
                    for position, child in enumerate(node.value)
                ]
            assert isinstance(node, MappingNode)
            return dict(self._entries(node, path))
        finally:
            self._open.pop()

    def _entries(self, node: MappingNode, path: KeyPath) -> Iterator[tuple[str, Any]]:
        first: dict[str, int] = {}
        for key, child in node.value:
            if not isinstance(key, ScalarNode) or str(key.tag) != _PREFIX + "str":
                if isinstance(key, ScalarNode) and str(key.tag) == _PREFIX + "merge":
                    self._refuse(key, "the merge key '<<' is not supported", "write the keys out")
                else:
                    self._refuse(key, "a key must be text", "put the key in quotes")
                continue
            name = str(key.value)
            if name in first:
                self._refuse(
                    key,
                    f"key {_clip(repr(name))} is given twice",
                    "keep one of them",
                    f"first given in line {first[name]}",
                )
                continue
            first[name] = key.start_mark.line + 1
            yield name, self.value(child, (*path, name), key)

    def _scalar(self, node: ScalarNode) -> Any:
        tag = str(node.tag)
        if tag == _PREFIX + "timestamp":  # dates stay the text they are written as
            return node.value
        if tag not in {_PREFIX + kind for kind in ("str", "int", "float", "bool", "null")}:
            self._refuse(node, f"tag {_clip(tag)} is not plain data", "remove the tag")
            return None
        try:
            return self._constructor.construct_object(node, deep=True)
        except (ValueError, OverflowError, LookupError, TypeError, AttributeError, YAMLError):
            self._refuse(node, "not a number that can be read", "write it as 0.25 or 2.5e-1")
            return None

    def _refuse(self, node: Node, message: str, hint: str, found: str | None = None) -> None:
        mark = node.start_mark
        if found is None:
            text = node.value if isinstance(node, ScalarNode) else None
            found = _clip(repr(text)) if text else None
        self.problems.append(
            Problem(self.shown, mark.line + 1, mark.column + 1, message, found, hint)
        )


def _clip(text: str, longest: int = 60) -> str:
    """Shorten text to at most `longest` characters."""
    text = visible(text)
    return text if len(text) <= longest else text[: longest - 3] + "..."


def _some(keys: dict[str, Any]) -> str:
    listed = [_clip(key, 30) for key in list(keys)[:6]]
    return ", ".join(listed) + (", ..." if len(keys) > 6 else "")
