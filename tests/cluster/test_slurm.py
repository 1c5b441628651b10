"""Campaigns on a real Slurm of one node: killed, resumed, interrupted, short of memory."""

from __future__ import annotations

import json
import os
import signal
import time
from collections import Counter, defaultdict
from pathlib import Path

import pytest
from campaign_runs import PATIENCE_S, call, finish, solved_cases, start, wait_until
from kill_loop import same_bits
from slurm_kit import ROOT, jobs, need_slurm, slurm

import scatterloom
from scatterloom.scattering.record import FAILED

# Two ladders, so anchors jobs work side by side; a case takes about half a second.
CONFIG = """\
campaign: two
title: A campaign for a cluster
wavelengths_um: [0.5]
materials:
  silt: {n: 1.5, k: 0.01}
particles:
  - {name: plate, material: silt, shape: {kind: spheroid, equatorial_to_polar: 2.0}}
  - {name: grain, material: silt, shape: {kind: spheroid, equatorial_to_polar: 1.4}}
sizes:
  size_parameter: {from: 0.5, to: 3.0, count: 12}
angles_deg: {from: 0, to: 180, step: 10}
accuracy: {f11_relative: 0.02, ratio_absolute: 0.01, efficiency_relative: 0.005}
solver: {levels: [40, 56], tolerance: 1e-4}
"""
CASES = 24


@pytest.fixture(scope="module")
def cluster(tmp_path_factory):
    """A Slurm at work, and the variables that lead to it."""
    need_slurm()
    folder = tmp_path_factory.mktemp("slurm")
    started = slurm("start", folder)
    try:
        assert started.returncode == 0, started.stderr
        name, _, value = started.stdout.strip().removeprefix("export ").partition("=")
        with pytest.MonkeyPatch.context() as patch:
            patch.setenv(name, value)
            patch.setenv("SCATTERLOOM_CASE_REUSE", "off")
            yield folder
    finally:
        stopped = slurm("stop", folder)
    assert stopped.returncode == 0, stopped.stderr
    # Idempotent, and it leaves nothing at work.
    assert slurm("stop", folder).returncode == 0
    assert slurm("status", folder).returncode == 1


def config(folder: Path, text: str = CONFIG) -> Path:
    path = folder / "two.yaml"
    path.write_text(text)
    return path


def test_starting_twice_starts_one(cluster):
    again = slurm("start", cluster)
    assert again.returncode == 0
    assert again.stdout.strip() == f"export SLURM_CONF={os.environ['SLURM_CONF']}"
    assert "running" in slurm("status", cluster).stdout


def test_killed_and_resumed_nothing_is_solved_twice(cluster, tmp_path):
    command = ("run", config(tmp_path), "--results", tmp_path / "results", "--profile", "slurm")
    campaign = tmp_path / "results" / "two"
    run = start(*command)
    wait_until(lambda: len(solved_cases(campaign)) >= 2 and jobs("RUNNING") != [], run)
    # The command alone: the kernel ends the engine with it, but the jobs belong to Slurm.
    os.kill(run.pid, signal.SIGKILL)
    finish(run)
    orphans = jobs()
    assert orphans, "the jobs ended with the command; there is nothing to test"
    kept = solved_cases(campaign)
    assert 2 <= len(kept) < CASES

    seen: dict[str, set[tuple[int, int]]] = defaultdict(set)
    alive: Counter[str] = Counter()
    resumed = start(*command)
    deadline = time.monotonic() + 2 * PATIENCE_S
    while resumed.poll() is None:
        if time.monotonic() > deadline:
            resumed.send_signal(signal.SIGTERM)
            raise AssertionError(f"still at work: {finish(resumed).stderr}")
        for digest, identity in solved_cases(campaign).items():
            seen[digest].add(identity)
        for comment, number in Counter(
            job["comment"] for job in jobs("RUNNING", "PENDING")
        ).items():
            alive[comment] = max(alive[comment], number)
        time.sleep(0.2)
    done = finish(resumed)
    assert done.returncode == 0, done.stderr
    assert "of an earlier run cancelled" in done.stderr
    assert jobs() == []
    after = solved_cases(campaign)
    assert len(after) == CASES
    assert {digest: after[digest] for digest in kept} == kept
    assert {len(identities) for identities in seen.values()} == {1}, "a case was solved twice"
    assert max(alive.values()) == 1, f"a job was there twice: {alive}"
    assert not list(campaign.rglob("*.partial"))
    everything_was_asked_for(jobs("COMPLETED"))

    # On this machine alone, in one go.
    local = call("run", command[1], "--results", tmp_path / "local", "--cores", 2)
    assert local.returncode == 0, local.stderr
    assert same_bits(campaign / "table.zarr", tmp_path / "local/two/table.zarr")


def everything_was_asked_for(completed: list[dict[str, str]]) -> None:
    """Part of the test above: every job asked for its memory, its time and its cores."""
    assert completed
    for job in completed:
        # The program itself takes 251 MiB, and what is predicted is asked for with a margin.
        assert 512 + 1.25 * 251 <= int(job["memory"].removesuffix("M")) < 2000
        minutes, seconds = job["minutes"].split(":")
        assert (int(minutes), seconds) == (16, "00")
        assert job["cpus"] == "1"


def test_an_interrupt_cancels_the_jobs(cluster, tmp_path):
    campaign = tmp_path / "results" / "two"
    run = start("run", config(tmp_path), "--results", tmp_path / "results", "--profile", "slurm")
    wait_until(lambda: jobs("RUNNING") != [], run)
    run.send_signal(signal.SIGTERM)
    done = finish(run)
    assert done.returncode == 130, done.stderr
    assert "the same command resumes" in done.stderr
    assert "Traceback" not in done.stderr
    assert jobs() == []
    assert json.loads((campaign / "state/turn.json").read_bytes())["submitted"] == []


def test_cases_too_large_for_the_memory_granted_fail_with_their_number(cluster, tmp_path):
    # A profile of one's own, which asks for less than the solver is predicted to take beside
    # the workflow engine (251 MiB and 400 MiB): no case is begun.
    profile = tmp_path / "short"
    profile.mkdir()
    text = (ROOT / "workflow/profiles/slurm/config.yaml").read_text()
    asked = "set-resources:\n  solve_anchors:\n    mem_mb: 620\n"
    (profile / "config.yaml").write_text(text + asked)
    small = CONFIG.replace("count: 12", "count: 2").replace("to: 3.0", "to: 1.0")
    path = config(tmp_path, small.split("  - {name: grain")[0] + small[small.index("sizes:") :])
    done = call("run", path, "--results", tmp_path / "results", "--profile", profile)
    assert done.returncode == 1, done.stderr
    assert "2 failed" in done.stderr
    table = scatterloom.open_table(tmp_path / "results/two/table.zarr").load()
    assert (table.status == FAILED).all()
    status = call("status", path, "--results", tmp_path / "results")
    assert "reason 2 (no_memory)" in status.stdout
