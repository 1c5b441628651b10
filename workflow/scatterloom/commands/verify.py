"""`scatterloom verify`: check that a table is complete and as it was written."""

from __future__ import annotations

import argparse
from pathlib import Path

from scatterloom.commands import COMMANDS
from scatterloom.errors import BadInput, IntegrityError

NAME = "verify"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument(
        "target", metavar="TABLE", help="a table.zarr folder, or the campaign file it belongs to"
    )
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument(
        "--sample", type=int, metavar="N", help="solve N random cells again as well and compare"
    )
    parser.add_argument("--seed", type=int, default=1, metavar="N", help="of the sample")


def execute(args: argparse.Namespace) -> int:
    """Verify; an IntegrityError (exit code 4) names every wrong file."""
    from scatterloom.store.commit import commit_record
    from scatterloom.store.table import verify

    path = Path(args.target)
    if args.sample is not None and not path.is_file():
        raise BadInput(f"{path}: no campaign file\n  hint: --sample needs the campaign file")
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
    return _sample(args) if args.sample is not None else 0


def _sample(args: argparse.Namespace) -> int:
    """Solve some cells again; 4 if one differs from the table beyond its error bars."""
    from scatterloom.graph import Graph
    from scatterloom.resolve import resolve_sample

    compared = []
    for cell in resolve_sample(Graph.open(args.target, args.results), args.sample, args.seed):
        compared.append(cell)
        print(
            f"{cell.particle}, {cell.wavelength_um:g} um, size parameter "
            f"{cell.size_parameter:.6g}: {'agrees' if cell.agrees else 'DIFFERS'}, at most "
            f"{cell.worst:.2g} of both half widths ({cell.worst_of})"
        )
    wrong = sum(not cell.agrees for cell in compared)
    print(f"{len(compared) - wrong} of {len(compared)} cells agree within their error bars")
    return IntegrityError.exit_code if wrong else 0
