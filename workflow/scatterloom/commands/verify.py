"""`scatterloom verify`: check that a table is complete and as it was written."""

from __future__ import annotations

import argparse
from pathlib import Path

from scatterloom.commands import COMMANDS

NAME = "verify"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument(
        "target", metavar="TABLE", help="a table.zarr folder, or the campaign file it belongs to"
    )
    parser.add_argument("--results", metavar="DIR", help="folder of all results")


def execute(args: argparse.Namespace) -> int:
    """Verify; an IntegrityError (exit code 4) names every wrong file."""
    from scatterloom.store.commit import commit_record
    from scatterloom.store.table import verify

    path = Path(args.target)
    if path.is_file():
        from scatterloom.campaign import load
        from scatterloom.store.layout import Layout, results_root

        path = Layout(results_root(args.results) / load(path).name).table
    verify(path)
    record = commit_record(path)
    print(
        f"{path}: intact, {record['files']} files, {record['bytes']} bytes, "
        f"committed {record['committed']}, content {record['content_digest'][:16]}"
    )
    return 0
