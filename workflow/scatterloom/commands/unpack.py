"""`scatterloom unpack`: unpack a campaign from somebody else and, if wanted, run it."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from scatterloom.commands import COMMANDS

NAME = "unpack"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("archive", metavar="FILE", help="a packed campaign")
    parser.add_argument("folder", metavar="DIR", help="where to; must not exist")
    parser.add_argument(
        "--most-gib", type=float, default=64.0, metavar="X", help="largest size when unpacked"
    )
    parser.add_argument(
        "--run", action="store_true", help="run the campaign there and compare with its table"
    )
    parser.add_argument("--cores", type=int, metavar="N", help="processor cores for --run")


def execute(args: argparse.Namespace) -> int:
    """Unpack; with --run 0 if the table is reproduced within its error bars, else 4."""
    from scatterloom.unpacking import unpack

    folder = Path(args.folder)
    files = unpack(Path(args.archive), folder, args.most_gib)
    print(f"{folder}: {files} files, all as the manifest says")
    return _run(folder, args.cores) if args.run else 0


def _run(folder: Path, cores: int | None) -> int:
    from scatterloom.campaign import load
    from scatterloom.cli import main
    from scatterloom.crate import MERGED, TABLE
    from scatterloom.errors import IntegrityError
    from scatterloom.resolve import same_tables
    from scatterloom.store.layout import Layout

    config, results = folder / MERGED, folder / "results"
    more = [] if cores is None else ["--cores", str(cores)]
    code = main(["run", str(config), "--results", str(results), *more])
    packed = folder / TABLE
    if code not in (0, 1) or not packed.exists():
        return code
    new = Layout(results / load(config).name).table
    beyond, worst = same_tables(packed, new)
    if beyond:
        raise IntegrityError(
            f"{new}: {beyond} cells differ from {packed} beyond the error bars of both "
            f"(up to {worst:.2g} times)"
        )
    print(f"{new}: agrees with {packed} within the error bars (at most {worst:.2g} of them)")
    if code:
        print("scatterloom: flagged cases, as in the packed table", file=sys.stderr)
    return code
