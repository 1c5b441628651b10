"""Kills a campaign at random, again and again, and checks that nothing is lost."""

from __future__ import annotations

import os
import random
import shutil
import signal
import time
from collections import Counter
from collections.abc import Callable
from pathlib import Path

import numpy as np
from campaign_runs import call, config, finish, processes_on, solved_cases, start

import scatterloom

# A single worker is the commonest loss on a busy machine (memory, queue limits).
VICTIMS = ("everything", "worker", "worker", "engine", "front")
VOLATILE = ("wall_seconds",)


def same_bits(left: Path, right: Path) -> bool:
    """Whether two tables agree in everything but the time it took."""
    one, two = scatterloom.open_table(left).load(), scatterloom.open_table(right).load()
    if set(one.variables) != set(two.variables):
        return False
    for name in one.variables:
        a, b = one[name].values, two[name].values
        if name in VOLATILE:
            continue
        if a.dtype.kind == "f":
            if np.ascontiguousarray(a).tobytes() != np.ascontiguousarray(b).tobytes():
                return False
        elif not (a == b).all():
            return False
    return True


def _pids(folder: Path, word: str) -> list[int]:
    found = []
    for entry in Path("/proc").iterdir():
        if not entry.name.isdigit():
            continue
        try:
            words = (entry / "cmdline").read_bytes().replace(b"\0", b" ").decode()
            where = os.readlink(entry / "cwd")
        except OSError:
            continue
        if word in words and (str(folder) in words or where.startswith(str(folder))):
            found.append(int(entry.name))
    return found


def _silence(folder: Path) -> None:
    deadline = time.monotonic() + 60.0
    while left := processes_on(folder):
        if time.monotonic() > deadline:
            raise AssertionError(f"still at work: {left}")
        time.sleep(0.05)


def kill_loop(
    folder: Path, kills: int, seed: int, count: int = 40, say: Callable[[str], None] = print
) -> Counter[str]:
    """Kill runs of a small campaign at random times until `kills` kills have struck.

    Whenever the campaign gets finished in spite of them, its table is compared with that of
    an undisturbed run, to the bit, and the campaign starts anew.

    Returns
    -------
    Counter
        Kills by victim, finished campaigns ("finished") and cases kept over kills ("kept").

    Raises
    ------
    AssertionError
        If a finished case was solved again or lost, a table differs, or a process stays.
    """
    chance = random.Random(seed)
    os.environ["SCATTERLOOM_CASE_REUSE"] = "off"  # every campaign is to solve its cases itself
    (folder / "whole").mkdir(parents=True)
    (folder / "cut").mkdir()
    began = time.monotonic()
    whole = call(
        "run", config(folder / "whole", count), "--results", folder / "whole/results", "--cores", 2
    )
    assert whole.returncode == 1, whole.stderr
    usual = time.monotonic() - began
    path = config(folder / "cut", count)
    results = folder / "cut" / "results"
    campaign = results / "tiny"
    counts: Counter[str] = Counter()
    before: dict[str, tuple[int, int]] = {}
    struck = 0
    while struck < kills:
        victim = chance.choice(VICTIMS)
        run = start("run", path, "--results", results, "--cores", 2)
        began = time.monotonic()
        at = began + chance.uniform(0.1, 0.9) * usual
        if victim == "worker":  # solvers are at work for a small part of such a small run
            while run.poll() is None and not _pids(folder / "cut", "solve-job"):
                time.sleep(0.01)
            at = time.monotonic() + chance.uniform(0.0, 0.2) * usual
        while time.monotonic() < at and run.poll() is None:
            time.sleep(0.02)
        hit = _strike(victim, run.pid, folder / "cut", chance) if run.poll() is None else False
        done = finish(run)
        _silence(folder / "cut")
        struck += hit
        counts[victim] += hit
        after = solved_cases(campaign)
        again = [digest for digest, identity in before.items() if after.get(digest) != identity]
        assert not again, f"solved twice or lost: {again}"
        counts["kept"] += len(before)
        before = after
        say(f"kill {struck}: {victim}{'' if hit else ' (missed)'}, {len(after)} cases kept")
        if done.returncode != 1 or not (campaign / "report.html").exists():
            continue
        usual = min(usual, time.monotonic() - began)
        assert len(after) == count
        assert same_bits(campaign / "table.zarr", folder / "whole/results/tiny/table.zarr")
        assert not list(campaign.rglob("*.partial"))
        counts["finished"] += 1
        shutil.rmtree(results)
        before = {}
    last = call("run", path, "--results", results, "--cores", 2)
    assert last.returncode == 1, last.stderr
    after = solved_cases(campaign)
    assert all(after[digest] == identity for digest, identity in before.items())
    assert same_bits(campaign / "table.zarr", folder / "whole/results/tiny/table.zarr")
    assert not list(campaign.rglob("*.partial"))
    counts["finished"] += 1
    return counts


def _strike(victim: str, front: int, folder: Path, chance: random.Random) -> bool:
    if victim == "everything":
        pids = [front, *_pids(folder, "snakemake"), *_pids(folder, "solve-job")]
    elif victim == "front":
        pids = [front]
    else:
        pids = _pids(folder, "solve-job" if victim == "worker" else "-m snakemake")
        pids = [chance.choice(sorted(pids))] if pids else []
    hit = False
    for pid in pids:
        try:
            os.kill(pid, signal.SIGKILL)
            hit = True
        except ProcessLookupError:
            continue
    return hit
