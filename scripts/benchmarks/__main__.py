"""Run benchmarks by name: ``scripts/bench transforms product``."""

from __future__ import annotations

import argparse
import importlib
import sys
from pathlib import Path

from threadpoolctl import threadpool_limits

from benchmarks import validation_page
from benchmarks.machine import describe
from benchmarks.output import write_result

BENCHMARKS = {
    "transforms": "Fourier transforms of two libraries on the boxes of the lattice product",
    "product": "the lattice product against the textbook way and a library's transforms",
    "solve": "one oblate spheroid: block solve and in-fill against one plane wave at a time",
    "starts": "products and error of in-filled sizes against the spacing of their anchors",
    "single": "products of one plane wave at a time by the field the iteration starts from",
    "scaling": "time against cells, waves and sizes of a ladder; one core and two",
    "large": "a large soft sphere, one plane wave: memory, products by start, errors",
    "convergence": "error against the number of cells, by the kind of cells at surfaces",
    "calibration": "whether the 95 % half widths tell the truth, random cases of five kinds",
    "accuracy_asked": "whether the accuracy asked is met, or its lack flagged; held-out cases",
}
SHORT = ("product", "scaling")
"""Benchmarks that have a short way."""

GROUPS = {"validation": validation_page.MEASURED}
"""Names that stand for several benchmarks."""
DEFAULT_OUTPUT = Path(__file__).parents[2] / "workflow" / "docs" / "benchmarks"


def main() -> int:
    """Run the benchmarks named, all of them if none is."""
    listed = "\n".join(f"  {name:<14} {text}" for name, text in BENCHMARKS.items())
    parser = argparse.ArgumentParser(
        prog="scripts/bench",
        description="Measure speed and accuracy against independent references.",
        epilog=f"benchmarks:\n{listed}\n"
        f"  {'validation':<14} {', '.join(validation_page.MEASURED)}, and the page made of them\n"
        f"  {'page':<14} only the page validation.md, from the results in DIR",
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("names", nargs="*", metavar="NAME", help="benchmarks; all if none is given")
    parser.add_argument("--threads", type=int, default=1, metavar="N", help="threads (default: 1)")
    parser.add_argument(
        "--output", type=Path, default=DEFAULT_OUTPUT, metavar="DIR", help="folder of the results"
    )
    parser.add_argument(
        "--short",
        action="store_true",
        help=f"only the beginning of {' and '.join(SHORT)}, to see that they run",
    )
    args = parser.parse_args()
    if args.short:
        args.names = args.names or list(SHORT)
        if args.output == DEFAULT_OUTPUT or set(args.names) - set(SHORT):
            parser.error(f"--short is for {', '.join(SHORT)} and an --output of its own")
    known = {*BENCHMARKS, *GROUPS, "page"}
    unknown = [name for name in args.names if name not in known]
    if unknown:
        parser.error(f"unknown benchmark {unknown[0]!r}; known: {', '.join(sorted(known))}")
    if args.threads < 1:
        parser.error(f"--threads is {args.threads}, must be 1 or more")
    args.output.mkdir(parents=True, exist_ok=True)
    asked = [one for name in args.names or BENCHMARKS for one in GROUPS.get(name, (name,))]
    for name in dict.fromkeys(asked):
        if name == "page":
            continue
        module = importlib.import_module(f"benchmarks.{name}")
        print(f"== {name}: {BENCHMARKS[name]}", file=sys.stderr)
        with threadpool_limits(args.threads):
            machine = describe(args.threads)
            result = module.run(args.threads, True) if args.short else module.run(args.threads)
        write_result(args.output, name, BENCHMARKS[name], machine, result)
    if {"page", *validation_page.QUOTED} & set(asked):
        return _page(args.output)
    return 0


def _page(folder: Path) -> int:
    """Write the validation page anew; its figures must be those last measured."""
    try:
        print(f"wrote {validation_page.write_page(folder)}", file=sys.stderr)
    except FileNotFoundError as missing:
        print(f"validation.md not written: {missing.filename} is missing", file=sys.stderr)
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main())
