"""Bad input: the exact message, the exit code, no traceback, nothing on standard output.

`messages.txt` holds the message expected for every entry of `bad_configs.EDITS`, under a
heading with its name. It is read and judged by people: change it by hand.
"""

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

from campaign.bad_configs import EDITS, GOOD, edited
from scatterloom.cli import main

_SNAPSHOT = (Path(__file__).parent / "messages.txt").read_text(encoding="utf-8")
MESSAGES = dict(re.findall(r"^## (.*)\n((?:(?!## ).*\n)*)", _SNAPSHOT, re.MULTILINE))


def check(content: str | bytes | None, capsys, monkeypatch, tmp_path) -> tuple[int, str, str]:
    """Run `scatterloom check campaign.yaml`; return exit code, output and messages."""
    monkeypatch.chdir(tmp_path)
    if isinstance(content, str):
        Path("campaign.yaml").write_text(content, encoding="utf-8")
    elif content is not None:
        Path("campaign.yaml").write_bytes(content)
    code = main(["check", "campaign.yaml"])
    output = capsys.readouterr()
    return code, output.out, output.err


def test_every_message_has_its_edit():
    assert set(MESSAGES) == set(EDITS)


@pytest.mark.parametrize("name", EDITS)
def test_message(name, capsys, monkeypatch, tmp_path):
    code, out, err = check(edited(*EDITS[name]), capsys, monkeypatch, tmp_path)
    assert (code, out, err) == (2, "", MESSAGES[name])


def test_good_file_is_good(capsys, monkeypatch, tmp_path):
    code, out, err = check(GOOD, capsys, monkeypatch, tmp_path)
    assert (code, err) == (0, "")
    assert out.startswith("campaign.yaml: ok, 2 particles x 2 wavelengths x 13 sizes")


NESTED = "a: " + "[" * 3000 + "]" * 3000
ALIASES = "a0: &a0 [1, 1, 1, 1, 1, 1, 1, 1, 1, 1]\n" + "".join(
    f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 10)}]\n" for i in range(1, 9)
)
FILES = {
    "missing": (None, "campaign.yaml: no such file"),
    "empty": ("", "campaign.yaml: the file is empty"),
    "blank": (" \n\n", "campaign.yaml: the file is empty"),
    "comments": ("# nothing\n", "campaign.yaml: the file holds only comments"),
    "document start": ("---\n", "campaign.yaml:2:1: a campaign file is a mapping of keys"),
    "list": ("- 1\n- 2\n", "campaign.yaml:1:1: a campaign file is a mapping of keys to values"),
    "text": ("hello\n", "campaign.yaml:1:1: a campaign file is a mapping of keys to values"),
    "latin": (
        "campaign: a\ntitle: Estuário\n".encode("latin-1"),
        "campaign.yaml:2: not UTF-8 text (byte 0xe1)",
    ),
    "binary": (b"\x89PNG\r\n\x1a\n\0\0", "campaign.yaml:1: not UTF-8 text (byte 0x89)"),
    "nul": (b"campaign: a\0b\n", "campaign.yaml:1:12: character U+0000 is not allowed in YAML"),
    "large": (b"# large\n" * 2**20, "campaign.yaml: the file is larger than 4 MiB"),
    "nested": (NESTED, "campaign.yaml: nested too deeply"),
    "aliases": (ALIASES, "campaign.yaml: too many values"),
}


@pytest.mark.parametrize("name", FILES)
def test_whole_file(name, capsys, monkeypatch, tmp_path):
    content, message = FILES[name]
    code, out, err = check(content, capsys, monkeypatch, tmp_path)
    assert (code, out) == (2, "")
    assert err.startswith(message)
    assert "  hint: " in err or name == "nul"


def test_folder(capsys, tmp_path):
    assert main(["check", str(tmp_path)]) == 2
    assert f"{tmp_path}: this is a folder, not a file" in capsys.readouterr().err


def test_named_pipe_does_not_block(capsys, tmp_path):
    pipe = tmp_path / "pipe.yaml"
    os.mkfifo(pipe)
    assert main(["check", str(pipe)]) == 2
    assert "this is not a regular file" in capsys.readouterr().err


def test_byte_order_mark_is_no_fault(capsys, monkeypatch, tmp_path):
    assert check(b"\xef\xbb\xbf" + GOOD.encode(), capsys, monkeypatch, tmp_path)[0] == 0


TABLES = {
    "header": (
        "wavelength,n,k\n0.5,1.5,0\n",
        "salt.csv:1:1: wrong header\n  found: 'wavelength,n,k'\n"
        "  hint: the first line must be the header 'wavelength_um,n,k'\n",
    ),
    "cells": (
        "wavelength_um,n,k\n0.4,1.5\n1.1,1.5,0\n",
        "salt.csv:2:1: wrong number of cells\n  found: 2 cells\n"
        "  hint: give three: wavelength_um,n,k\n",
    ),
    "number": (
        "# from nowhere\nwavelength_um,n,k\n0.4,x,0\n1.1,1.5,0\n",
        "salt.csv:3:1: n is not a number\n  found: 'x'\n  hint: give a number from 0.01 to 10\n",
    ),
    "sign": (
        "wavelength_um,n,k\n0.4,1.5,0\n1.1,1.5,-1e-3\n",
        "salt.csv:3:1: k is out of range\n  found: '-1e-3'\n  hint: give a number from 0 to 10; "
        "absorption is a positive k: the index is n + ik\n",
    ),
    "order": (
        "wavelength_um,n,k\n1.1,1.5,0\n0.4,1.5,0\n",
        "salt.csv:3:1: wavelength_um 0.4 does not exceed the row before (1.1)\n"
        "  hint: give every wavelength once, in ascending order\n",
    ),
    "rows": (
        "wavelength_um,n,k\n",
        "salt.csv: the table has no rows\n"
        "  hint: give the header 'wavelength_um,n,k' and one row for each wavelength\n",
    ),
    "cover": (
        "wavelength_um,n,k\n0.6,1.5,0\n1.1,1.5,0\n",
        "campaign.yaml:7:17: materials.salt.table does not cover 0.5 um\n"
        "  found: rows from 0.6 to 1.1 um\n"
        "  hint: add rows or drop these wavelengths: optical constants are never extrapolated\n",
    ),
}


@pytest.mark.parametrize("name", TABLES)
def test_table(name, capsys, monkeypatch, tmp_path):
    table, message = TABLES[name]
    (tmp_path / "salt.csv").write_text(table)
    text = edited("{n: 1.5, k: 0.0}", "{table: salt.csv}")
    code, out, err = check(text, capsys, monkeypatch, tmp_path)
    assert (code, out) == (2, "")
    assert err == message + "scatterloom: 1 problem; nothing was started\n"


def test_table_faults_are_shown_with_those_of_the_file(capsys, monkeypatch, tmp_path):
    (tmp_path / "salt.csv").write_text("wavelength_um,n,k\n0.4,0,0\n1.1,1.5,90\n")
    text = edited("{n: 1.5, k: 0.0}", "{table: salt.csv}", "step: 1}", "step: 7}")
    _, _, err = check(text, capsys, monkeypatch, tmp_path)
    places = [line.split(": ")[0] for line in err.splitlines() if not line.startswith(" ")]
    assert places == ["campaign.yaml:17:38", "salt.csv:2:1", "salt.csv:3:1", "scatterloom"]


WARNINGS = {
    "population beyond the table": (
        ("radius_um: 0.2, geometric_sd: 1.3", "radius_um: 0.2, geometric_sd: 2.5"),
        "warning: campaign.yaml:23:11: population 'haze' reaches beyond the sizes of the table\n",
    ),
    "unused material": (
        ("material: salt", "material: silt"),
        "warning: campaign.yaml:7:3: material 'salt' is not used by any particle\n",
    ),
    "nanometres": (
        ("[0.5, 1.0]", "[0.5, 532]"),
        "warning: campaign.yaml:3:23: wavelength 532 um is longer than infrared optics use\n",
    ),
}


@pytest.mark.parametrize("name", WARNINGS)
def test_warning(name, capsys, monkeypatch, tmp_path):
    edit, message = WARNINGS[name]
    code, out, err = check(edited(*edit), capsys, monkeypatch, tmp_path)
    assert code == 0
    assert out.startswith("campaign.yaml: ok")
    assert err.startswith(message)


def test_installed_command(tmp_path):
    """The real entry point, in a process of its own."""
    (tmp_path / "campaign.yaml").write_text(edited(*EDITS["unknown key in section"]))
    command = Path(sys.executable).with_name("scatterloom")
    done = subprocess.run(
        [command, "check", "campaign.yaml"], cwd=tmp_path, capture_output=True, text=True
    )
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr == MESSAGES["unknown key in section"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["campaign.yaml"]
