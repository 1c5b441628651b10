"""The command line: choice of the command, exit codes, what goes where."""

import errno
import importlib
import json
import math
import subprocess
import sys
import types

import pytest

import scatterloom
from campaign.bad_configs import GOOD
from scatterloom.cli import main
from scatterloom.commands import COMMANDS
from scatterloom.errors import (
    BadInput,
    CampaignHeld,
    EnvironmentProblem,
    IntegrityError,
    ScatterloomError,
)


@pytest.fixture
def config(tmp_path):
    path = tmp_path / "campaign.yaml"
    path.write_text(GOOD)
    return str(path)


@pytest.fixture
def failing(monkeypatch):
    """Replace the command `check` by one that raises what it is given."""

    def install(error: BaseException) -> None:
        def execute(args):
            raise error

        module = types.ModuleType("scatterloom.commands.check")
        module.configure = lambda parser: parser.add_argument("config")
        module.execute = execute
        monkeypatch.setitem(sys.modules, module.__name__, module)

    return install


def test_version(capsys):
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"scatterloom {scatterloom.__version__}\n"


def test_help_lists_every_command_and_the_exit_codes(capsys):
    assert main(["--help"]) == 0
    out = " ".join(capsys.readouterr().out.split())
    for name, text in COMMANDS.items():
        assert f" {name} {text}" in out
    assert "75 campaign held by another run" in out


def test_starting_up_imports_no_numerics():
    """The help of the program must not wait for numerical libraries."""
    code = (
        "import sys; from scatterloom.cli import main; main(['--help'])\n"
        "heavy = {'numpy', 'scipy', 'numba', 'pydantic', 'xarray', 'snakemake'}\n"
        "sys.exit(', '.join(heavy & set(sys.modules)) or 0)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert (done.returncode, done.stderr) == (0, "")


@pytest.mark.parametrize("name", COMMANDS)
def test_module_of_command(name):
    module = importlib.import_module("scatterloom.commands." + name.replace("-", "_"))
    assert (name, COMMANDS[name]) == (module.NAME, module.HELP)
    assert callable(module.configure) and callable(module.execute)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["chek", "x"], "scatterloom: unknown command 'chek'\n  hint: did you mean 'check'?\n"),
        (["frobnicate"], "scatterloom: unknown command 'frobnicate'\n  hint: see 'scatterloom"),
        ([], "scatterloom: the following arguments are required: COMMAND\n  hint: see"),
        (["check"], "scatterloom: the following arguments are required: CONFIG\n  hint: see"),
        (["check", "a", "--jsn"], "scatterloom: unrecognized arguments: --jsn\n  hint: see"),
    ],
)
def test_usage(words, message, capsys):
    assert main(words) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith(message)


def test_check_json(config, capsys):
    assert main(["check", config, "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    assert (result["particles"], result["wavelengths"], result["sizes"]) == (2, 2, 13)
    assert (result["angles"], result["cases"]) == (181, 52)


def test_estimate(config, capsys):
    assert main(["estimate", config, "--no-calibration", "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    assert (result["cells"], result["cases"]) == (52, 52)
    assert result["core_hours"] > 0.0
    # Nothing was measured: the error is all of it.
    assert result["core_hours_error"] == result["core_hours"]
    assert result["products"] > result["cases"]
    # The thirteenth radius is 0.1 * 1.2^12 um, the shorter wavelength 0.5 um.
    largest = 2 * math.pi * 0.1 * 1.2**12 / 0.5
    assert result["largest_size_parameter"] == pytest.approx(largest, rel=1e-11)
    assert main(["estimate", config, "--no-calibration"]) == 0
    out, err = capsys.readouterr()
    assert "cases to solve             52\n" in out
    assert "finest lattice             24 cells across\n" in out
    assert err == ""


@pytest.mark.parametrize(
    ("error", "code", "message"),
    [
        (BadInput("no"), 2, "scatterloom: no\n"),
        (EnvironmentProblem("no"), 3, "scatterloom: no\n"),
        (IntegrityError("no"), 4, "scatterloom: no\n"),
        (CampaignHeld("no"), 75, "scatterloom: no\n"),
        (ScatterloomError("no"), 1, "scatterloom: no\n"),
        (MemoryError(), 3, "scatterloom: out of memory\n"),
        (PermissionError(13, "Permission denied", "/x"), 3, "scatterloom: /x: Permission denied\n"),
        (
            OSError(errno.ENOSPC, "No space left on device", "/x"),
            3,
            "scatterloom: /x: No space left on device\n  hint: free some space; the same "
            "command resumes\n",
        ),
        (KeyboardInterrupt(), 130, "scatterloom: interrupted; the same command resumes\n"),
        (
            RuntimeError("odd\nmore"),
            70,
            "scatterloom: internal error: RuntimeError: odd\n"
            "  hint: rerun with --debug and report what it shows\n",
        ),
    ],
)
def test_exit_codes(error, code, message, failing, capsys):
    failing(error)
    assert main(["check", "x"]) == code
    assert capsys.readouterr().err == message


@pytest.mark.parametrize("words", [["--debug", "check", "x"], ["check", "x", "--debug"]])
def test_debug_shows_the_traceback(words, failing, capsys):
    failing(RuntimeError("odd"))
    assert main(words) == 70
    assert "Traceback (most recent call last)" in capsys.readouterr().err


def test_closed_pipe_is_quiet(config):
    """`scatterloom ... | head -0` must not end in a complaint."""
    done = subprocess.run(
        [
            "bash",
            "-c",
            f'"{sys.executable}" -m scatterloom.cli estimate --no-calibration "{config}" | true',
        ],
        capture_output=True,
        text=True,
    )
    assert done.stderr == ""
