"""`scatterloom run`: run a campaign, or go on with one that was interrupted."""

from __future__ import annotations

import argparse
import contextlib
import json
import signal
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING

from scatterloom.commands import COMMANDS
from scatterloom.commands._arguments import positive

if TYPE_CHECKING:
    from scatterloom.commands._engine import Engine, FailedRule
    from scatterloom.commands._profile import Profile
    from scatterloom.graph import Graph
    from scatterloom.store.progress import Meter, Progress
    from scatterloom.store.turn import Turn

NAME = "run"
HELP = COMMANDS[NAME]

LOOK_EVERY_S = 0.5
SUBMISSION_S = 1.0
LOG_LINES_SHOWN = 5


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument(
        "config",
        metavar="CONFIG",
        nargs="?",
        help="campaign file (YAML; default: config/demo.yaml of the checkout)",
    )
    parser.add_argument(
        "--results", metavar="DIR", help="folder of all results (default: results/ here)"
    )
    parser.add_argument(
        "--cores", type=positive, metavar="N", help="processor cores to use (default: all)"
    )
    parser.add_argument(
        "--retry-failed", action="store_true", help="take up the cases that failed before"
    )
    parser.add_argument(
        "--verify", action="store_true", help="read every finished file first, mend what is damaged"
    )
    parser.add_argument(
        "--threads", type=positive, default=1, metavar="N", help="threads of a job (default: 1)"
    )
    parser.add_argument(
        "--profile",
        default="laptop",
        metavar="NAME",
        help="where the jobs run: laptop (this machine, the default), slurm, or a folder with "
        "a profile of the workflow engine",
    )


def execute(args: argparse.Namespace) -> int:
    """Run; 0 done, 1 some cases failed or flagged, and the codes of the errors."""
    from scatterloom.commands._profile import find_profile
    from scatterloom.graph import Graph
    from scatterloom.mending import take_up_failed
    from scatterloom.store.held import hold
    from scatterloom.store.progress import Meter

    top = _checkout()
    config = Path(args.config) if args.config else top / "config" / "demo.yaml"
    graph = Graph.open(config, args.results)
    for warning in graph.campaign.warnings:
        print(f"warning: {warning}", file=sys.stderr)
    profile = find_profile(args.profile, top / "workflow" / "profiles")
    with hold(graph.layout.lock) as lock, _terminable(), _turn(graph, profile) as turn:
        graph.sweep()
        _mend(graph, digests=args.verify)
        if args.retry_failed:
            print(f"{take_up_failed(graph)} failed cases are taken up again", file=sys.stderr)
        graph.prepare()
        meter = Meter(graph.layout, graph.cases_of)

        def attempt() -> tuple[Engine, int]:
            from scatterloom.commands._engine import Engine

            meter.forget_failures()
            engine = Engine(graph, config, top, args.cores, args.threads, profile, turn, lock)
            try:
                return engine, _attend(engine, graph, meter)
            finally:
                # Silent if it has ended; otherwise an interrupt, or a fault of this program.
                engine.stop()

        engine, code = attempt()
        # A reader that meets a damaged file stops the run; what is lost is solved again. A
        # case that went over what a cluster grants fails, and the others go on.
        if code and _mend(graph, digests=True):
            engine, code = attempt()
        while code and _give_up(graph, engine):
            engine, code = attempt()
        if code == 0:
            graph.drop_fields()
    if code != 0:
        return _explain(engine, graph, meter.measure())
    return _conclude(graph)


def _checkout() -> Path:
    from scatterloom.errors import EnvironmentProblem
    from scatterloom.store.layout import checkout

    top = checkout()
    if top is None:
        raise EnvironmentProblem(
            "a campaign runs from a checkout of scatterloom (its Snakefile is not found)"
        )
    return top


@contextlib.contextmanager
def _turn(graph: Graph, profile: Profile) -> Iterator[Turn]:
    """Begin the turn of this run: jobs that others have left in Slurm are cancelled first.

    When the block ends, however it does, those of this run are cancelled as well.
    """
    from scatterloom.commands._slurm import cancel
    from scatterloom.store.turn import settle, take_turn

    path = graph.layout.turn
    turn = take_turn(path, submits=profile.slurm)
    own = (turn.token,) if profile.slurm else ()
    earlier = tuple(name for name in turn.job_names if turn.token not in name)
    count = cancel(earlier)
    if earlier:
        # A submission may have been under way when its engine was killed.
        time.sleep(SUBMISSION_S)
        count += cancel(earlier)
    if count:
        jobs = "1 Slurm job" if count == 1 else f"{count} Slurm jobs"
        print(f"{jobs} of an earlier run cancelled; what they finished is kept", file=sys.stderr)
    turn = settle(path, turn, own)
    try:
        yield turn
    finally:
        cancel(turn.job_names)
        settle(path, turn, ())


def _give_up(graph: Graph, engine: Engine) -> bool:
    """Fail the cases that a cluster killed for taking too much; return whether there were any."""
    from scatterloom.mending import fail_case_at_work

    given_up = False
    for failure in engine.failures():
        if failure.over_limit is not None:
            given_up |= fail_case_at_work(graph, Path(failure.log).stem, failure.over_limit)
    return given_up


def _mend(graph: Graph, *, digests: bool) -> bool:
    """Put damaged results aside and say so; return whether there were any."""
    from scatterloom.mending import put_damaged_aside

    damaged = put_damaged_aside(graph, digests=digests)
    for text in damaged:
        print(f"warning: {text}; made again, solving only what is lost", file=sys.stderr)
    return bool(damaged)


@contextlib.contextmanager
def _terminable() -> Iterator[None]:
    """Let SIGTERM and SIGHUP end the run as an interrupt from the keyboard does.

    A signal that is ignored already, as SIGHUP under nohup, stays so.
    """

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    numbers = [
        number
        for number in (signal.SIGTERM, signal.SIGHUP)
        if signal.getsignal(number) != signal.SIG_IGN
    ]
    previous = {number: signal.signal(number, interrupt) for number in numbers}
    try:
        yield
    finally:
        for number, handler in previous.items():
            signal.signal(number, handler)


def _attend(engine: Engine, graph: Graph, meter: Meter) -> int:
    """Show the progress until the engine ends; return its exit code."""
    from scatterloom.commands._display import PHASES, Display, TimeLeft

    clock = TimeLeft()
    weights = {name: max(job.seconds, 1e-9) for name, job in graph.jobs.items()}
    with Display(f"campaign {graph.campaign.name}") as display:
        while True:
            code = engine.wait(LOOK_EVERY_S)
            progress = meter.measure()
            phase = PHASES.get(engine.current_rule() or "", "planning")
            share = meter.share_done(weights)
            display.show(progress, phase, clock.update(share, time.monotonic()))
            if code is not None:
                return code


def _explain(engine: Engine, graph: Graph, progress: Progress) -> int:
    """Say which jobs failed and why; return the gravest of their exit codes."""
    layout = graph.layout
    reported = {f"state/logs/jobs/{job.job}.log": job for job in progress.failed}
    # A job that failed once and was done at the second try is no failure.
    failures = [f for f in engine.failures() if not layout.case_file(Path(f.log).stem).exists()]
    codes = []
    for failure in failures:
        code = failure.exit_code
        reason = _last_lines(layout.folder / failure.log)
        if failure.killed_by is not None:
            code, reason = 3, [f"killed by {failure.killed_by}; was memory short?"]
        elif failure.log in reported:
            code, reason = reported[failure.log].exit_code, [reported[failure.log].message]
        elif failure.batch_log is not None:
            said = failure.words_of_slurm()[-LOG_LINES_SHOWN:]
            code, reason = 3, said or ["ended by the cluster, which does not say why"]
        codes.append(code)
        _tell(graph, failure, reason)
    if not failures:
        print("scatterloom: the workflow engine failed:", file=sys.stderr)
        for words in engine.last_words():
            print(f"  {words}", file=sys.stderr)
        print(f"  log: {engine.log}", file=sys.stderr)
        return 3
    jobs = "1 job" if len(failures) == 1 else f"{len(failures)} jobs"
    print(
        f"scatterloom: {jobs} failed; {progress.cases_done} of {progress.cases} "
        "cases are solved and kept\n  hint: the same command tries the rest again",
        file=sys.stderr,
    )
    return max((code for code in codes if code in (3, 4)), default=1)


def _tell(graph: Graph, failure: FailedRule, reason: list[str]) -> None:
    log = graph.layout.folder / failure.log
    name = Path(failure.log).stem
    print(f"scatterloom: job {name} ({failure.rule}) failed", file=sys.stderr)
    for words in reason:
        print(f"  {words}", file=sys.stderr)
    print(f"  log: {log}", file=sys.stderr)
    if failure.batch_log is not None:
        print(f"  log of the cluster: {failure.batch_log}", file=sys.stderr)


def _last_lines(path: Path) -> list[str]:
    try:
        words = path.read_text(errors="replace").splitlines()
    except OSError:
        return ["it left no log"]
    return [text for text in words if text.strip()][-LOG_LINES_SHOWN:]


def _conclude(graph: Graph) -> int:
    """Say where the results are; return 0, or 1 if cases failed or were flagged."""
    layout = graph.layout
    cells = json.loads(layout.receipt.read_bytes())["cells"]
    for label, path in (
        ("table", layout.table),
        ("figures", layout.figures),
        ("report", layout.report),
    ):
        print(f"{label:<8} {path}")
    flagged = {name: count for name, count in cells.items() if name != "solved" and count}
    text = [f"{count} {name.replace('_', ' ')}" for name, count in flagged.items()]
    audit = json.loads(layout.audit.read_bytes())
    if not flagged and audit["passed"]:
        return 0
    checks = sum(1 for check in audit["checks"] if check["flagged"])
    if checks:
        text.append(f"{checks} physical checks flagged")
    if audit["short"]:
        text.append(f"{audit['short']} with wider half widths than asked and no other warning")
    print(
        f"scatterloom: of {sum(cells.values())} cells, {', '.join(text)}; see the report",
        file=sys.stderr,
    )
    return 1
