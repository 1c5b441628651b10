"""`scatterloom solve-single`: solve one entry of `single_solves` (the rule graph calls this)."""

from __future__ import annotations

import argparse
import os
import sys

from scatterloom.commands import COMMANDS

NAME = "solve-single"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("name", metavar="NAME", help="name under single_solves")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--threads", type=int, default=1, metavar="N", help="threads to use")
    parser.add_argument("--parent", type=int, metavar="PID", help="end when this process ends")


def execute(args: argparse.Namespace) -> int:
    """Solve, or go on; the file says whether the residual asked was reached."""
    from scatterloom.commands._parent import end_with_parent

    if args.parent is not None:
        end_with_parent(args.parent)
    for library in ("OMP", "OPENBLAS", "MKL", "NUMBA"):
        # Before the numerical libraries are loaded, which read these once.
        os.environ.setdefault(f"{library}_NUM_THREADS", str(args.threads))

    from scatterloom.bulk.exchange_files import write_netcdf
    from scatterloom.campaign import load
    from scatterloom.campaign.singles import singles_of
    from scatterloom.errors import BadInput
    from scatterloom.limits import SHARE_OF_MEMORY, Limits, machine_bytes
    from scatterloom.singles import published, solve_single
    from scatterloom.solve.symmetric import Iterate
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.provenance import now

    campaign = load(args.config)
    known = {single.name: single for single in singles_of(campaign)}
    if args.name not in known:
        names = ", ".join(known) or "none"
        raise BadInput(f"{args.config}: no single solve '{args.name}'\n  hint: there are {names}")
    single = known[args.name]
    layout = Layout(results_root(args.results) / campaign.name)
    path = layout.single(single.name)
    if published(path, single):
        # The rule graph compares times.
        os.utime(path)
        print(f"{path}: solved before")
        return 0
    solver = campaign.model.solver
    allowed = SHARE_OF_MEMORY * machine_bytes()
    if solver.memory_gib is not None:
        allowed = solver.memory_gib * 2**30
    limits = Limits(allowed, checkpoint_seconds=60.0 * solver.checkpoint_minutes)
    checkpoint = layout.checkpoints / f"single-{single.digest}.npz"

    def tell(what: str, state: Iterate) -> None:
        print(
            f"{single.name}: {what}, {state.products} products, residual {state.residual:.2g}",
            file=sys.stderr,
            flush=True,
        )

    found = solve_single(single, checkpoint, args.threads, limits, tell)
    found.attrs |= {
        "date_created": now(),
        "config": campaign.merged_yaml(),
        **{k: str(v) for k, v in campaign.model.provenance.model_dump(exclude_none=True).items()},
    }
    path.parent.mkdir(parents=True, exist_ok=True)
    write_netcdf(path, found)
    checkpoint.unlink(missing_ok=True)
    used = found.attrs["memory_used_bytes"] / found.attrs["memory_predicted_bytes"]
    print(f"{path}: memory {100.0 * used:.0f} % of the prediction")
    if not found.attrs["converged"]:
        print(f"warning: {single.name}: the residual asked was not reached", file=sys.stderr)
    return 0
