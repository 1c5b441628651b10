"""Whatever is done to a campaign file, it is either good or refused with a message."""

import contextlib
import io
import os
import tempfile
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from scatterloom.campaign.reference import ROOT
from scatterloom.cli import main

DEMO = (ROOT / "config" / "demo.yaml").read_text(encoding="utf-8")
LINES = DEMO.splitlines(keepends=True)

# Pieces with a meaning in YAML or in Python, and values at the edges of what numbers can be.
PIECES = st.sampled_from(
    [
        *"{}[]:,-#&*!|>'\"%@`~?\t\n\0\u0085\u2028\ufeff\\",
        *("<<:", "---", "...", "{}", "[]", "[[]]", "{a: {}}", "&a", "*a", "null", "true"),
        *(".nan", ".inf", "-.inf", "-0", "0", "1e400", "-1", "1e-320", "0x1F", "0o17", "1_000"),
        *("12:30", "2020-01-01", "!!float", "!!binary", "!!set", "!!omap", "!!timestamp"),
        *("!!python/object:os.system", "9" * 5000),
    ]
)
TEXT = st.one_of(PIECES, st.text(max_size=6))


@st.composite
def mutated(draw) -> str:
    lines = list(LINES)
    for _ in range(draw(st.integers(1, 4))):
        where = draw(st.integers(0, len(lines) - 1))
        line = lines[where]
        start = draw(st.integers(0, len(line)))
        end = draw(st.integers(start, min(len(line), start + 12)))
        match draw(st.integers(0, 5)):
            case 0:
                lines[where] = line[:start] + draw(TEXT) + line[end:]
            case 1:
                lines.insert(where, draw(st.sampled_from(LINES)))
            case 2 if len(lines) > 1:
                del lines[where]
            case 3:
                key, colon, _ = line.partition(":")
                lines[where] = key + colon + " " + draw(TEXT) + "\n"
            case 4:
                lines[where] = " " * draw(st.integers(0, 8)) + line.lstrip(" ")
            case _:
                lines[where] = line[:start] + line[end:]
    return "".join(lines)


def outcome(content: bytes) -> tuple[int, str, str]:
    """Run `scatterloom check` on a file of this content; return code, output, messages."""
    out, err = io.StringIO(), io.StringIO()
    with tempfile.TemporaryDirectory() as folder:
        path = os.path.join(folder, "c.yaml")
        Path(path).write_bytes(content)
        with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
            code = main(["check", path])
        return code, out.getvalue(), err.getvalue().replace(path, "c.yaml")


def judge(code: int, out: str, err: str) -> None:
    assert code in (0, 2), err
    assert "Traceback" not in err and "internal error" not in err
    if code == 2:
        assert out == ""
        assert "c.yaml" in err or "needs" in err
        shown = err.replace("\n", "")
        assert shown.isprintable(), "a campaign file must not reach the terminal raw"
    else:
        assert out.startswith("c.yaml: ok") or "/c.yaml: ok" in out


@settings(max_examples=300, deadline=None)
@given(mutated())
def test_mutated_demo(text):
    judge(*outcome(text.encode("utf-8", "surrogatepass")))


@settings(max_examples=100, deadline=None)
@given(st.binary(max_size=60), st.integers(0, len(DEMO)))
def test_bytes_in_the_demo(inserted, position):
    content = DEMO.encode()
    judge(*outcome(content[:position] + inserted + content[position:]))
