"""The command line: find the command, run it, turn errors into messages and exit codes.

Data go to standard output; messages, progress and logs to standard error, without colour.
"""

from __future__ import annotations

import argparse
import difflib
import errno
import importlib
import os
import sys
import traceback
from collections.abc import Sequence
from typing import NoReturn

from scatterloom import __version__
from scatterloom.commands import COMMANDS
from scatterloom.errors import BadInput, ScatterloomError

BAD_INPUT = BadInput.exit_code
ENVIRONMENT = 3
INTERNAL = 70  # EX_SOFTWARE of sysexits.h
INTERRUPTED = 130
PIPE_CLOSED = 141  # what a shell reports for a program ended by SIGPIPE


class _Parser(argparse.ArgumentParser):
    """Says what is wrong in the form of all other messages."""

    def error(self, message: str) -> NoReturn:
        print(f"scatterloom: {message}", file=sys.stderr)
        print(f"  hint: see '{self.prog} --help'", file=sys.stderr)
        raise SystemExit(BAD_INPUT)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process if missing.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    debug = "--debug" in words
    try:
        return _run(words)
    except SystemExit as end:  # argparse ends --help, --version and usage errors so
        return end.code if isinstance(end.code, int) else 0
    except Exception as error:
        if debug:
            traceback.print_exc()
        return _explain(error)
    except KeyboardInterrupt:
        if debug:
            traceback.print_exc()
        print("scatterloom: interrupted; the same command resumes", file=sys.stderr)
        return INTERRUPTED


def _run(words: list[str]) -> int:
    # No option before the command takes a value, so the first bare word is the command.
    command = next((word for word in words if not word.startswith("-")), None)
    if command is not None and command not in COMMANDS:
        close = difflib.get_close_matches(command, list(COMMANDS), n=1)
        hint = f"did you mean '{close[0]}'?" if close else "see 'scatterloom --help'"
        raise BadInput(f"unknown command {command!r}\n  hint: {hint}")
    parser = _Parser(
        prog="scatterloom",
        description="Polarimetric scattering campaigns of nonspherical particles.",
        epilog="Exit codes: 0 done; 1 finished, some cases failed or flagged; 2 bad input; "
        "3 environment, disk or memory; 4 integrity; 75 campaign held by another run; "
        "130 interrupted.",
    )
    parser.add_argument("--version", action="version", version=f"scatterloom {__version__}")
    parser.add_argument("--debug", action="store_true", help="show tracebacks of errors")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)
    for name, text in COMMANDS.items():
        sub = commands.add_parser(name, help=text, description=text[0].upper() + text[1:] + ".")
        sub.add_argument("--debug", action="store_true", default=argparse.SUPPRESS)
        if name == command:
            module = importlib.import_module("scatterloom.commands." + name.replace("-", "_"))
            module.configure(sub)
    args = parser.parse_args(words)
    code: int = module.execute(args)
    sys.stdout.flush()  # a closed pipe is to be noticed here, not at shutdown
    return code


def _explain(error: Exception) -> int:
    """Write one message for an error and return the exit code."""
    match error:
        case BrokenPipeError():
            # The reader of our output went away; Python must not complain of it at shutdown.
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            return PIPE_CLOSED
        case BadInput(problems=problems) if problems:
            print(error, file=sys.stderr)
            number = f"{len(problems)} problem{'s' if len(problems) > 1 else ''}"
            print(f"scatterloom: {number}; nothing was started", file=sys.stderr)
            return error.exit_code
        case ScatterloomError():
            print(f"scatterloom: {error}", file=sys.stderr)
            return error.exit_code
        case MemoryError():
            print("scatterloom: out of memory", file=sys.stderr)
            return ENVIRONMENT
        case OSError():
            name = f"{error.filename}: " if error.filename else ""
            print(f"scatterloom: {name}{error.strerror or error}", file=sys.stderr)
            if error.errno in (errno.ENOSPC, errno.EDQUOT):
                print("  hint: free some space; the same command resumes", file=sys.stderr)
            return ENVIRONMENT
    text = str(error).split("\n", 1)[0]
    print(
        f"scatterloom: internal error: {type(error).__name__}: {text}\n"
        "  hint: rerun with --debug and report what it shows",
        file=sys.stderr,
    )
    return INTERNAL


if __name__ == "__main__":
    sys.exit(main())
