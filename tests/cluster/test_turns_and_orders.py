"""What keeps an old run's jobs from writing, and what is asked of Slurm; no Slurm is needed."""

from __future__ import annotations

import json
import re
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import pytest
from campaign_runs import config
from ruamel.yaml import YAML

from job_kit import job, records_of
from scatterloom import jobs
from scatterloom.commands import _slurm
from scatterloom.commands._profile import find_profile
from scatterloom.commands.solve_job import ATTEMPTS
from scatterloom.errors import BadInput, CampaignHeld, EnvironmentProblem, IntegrityError
from scatterloom.graph import Graph
from scatterloom.limits import Limits, TimeGrantedIsUp
from scatterloom.mending import fail_case_at_work, take_up_failed
from scatterloom.outline import Planned
from scatterloom.scattering.reasons import reason_of
from scatterloom.scattering.record import FAILED
from scatterloom.store.casefile import read_records
from scatterloom.store.failures import read_failures
from scatterloom.store.layout import Layout
from scatterloom.store.progress import RUNNING, Heartbeat, write_heartbeat
from scatterloom.store.turn import check_turn, read_turn, settle, take_turn

PROFILES = Path(__file__).parents[2] / "workflow" / "profiles"
SHAPE = {"kind": "spheroid", "equatorial_to_polar": 2.0}


def test_a_new_run_takes_the_turn_and_remembers_the_jobs_of_earlier_ones(tmp_path):
    path = tmp_path / "turn.json"
    assert read_turn(path) is None
    first = take_turn(path, submits=True)
    check_turn(path, first.token)
    second = take_turn(path, submits=True)
    assert second.submitted == (first.token, second.token)
    with pytest.raises(CampaignHeld, match=f"belongs to run {first.token}"):
        check_turn(path, first.token)
    third = take_turn(path, submits=False)
    assert third.submitted == (first.token, second.token)
    assert settle(path, third, ()).submitted == ()
    assert read_turn(path) == settle(path, third, ())


def test_an_unreadable_turn_stops_everybody(tmp_path):
    path = tmp_path / "turn.json"
    token = take_turn(path, submits=True).token
    path.write_bytes(path.read_bytes()[:-1])
    with pytest.raises(IntegrityError, match="no job of this campaign is at work"):
        take_turn(path, submits=True)
    with pytest.raises(CampaignHeld):
        check_turn(path, token)


def planned(folder: Path):
    one = job("anchors-a", SHAPE, 1.5 + 0.01j, [0.5, 1.0], (8, 12))
    path = Layout(folder).job_file(one.name)
    path.parent.mkdir(parents=True)
    path.write_text(json.dumps(one.spec()))
    return one, path


def test_a_job_of_an_earlier_run_ends_before_it_writes_anything(tmp_path):
    _, path = planned(tmp_path)
    old = take_turn(Layout(tmp_path).turn, submits=True)
    take_turn(Layout(tmp_path).turn, submits=True)
    before = sorted(tmp_path.rglob("*"))
    done = subprocess.run(
        [sys.executable, "-m", "scatterloom", "solve-job", str(path), "--turn", old.token],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 75, done.stderr
    assert old.token in done.stderr
    assert sorted(tmp_path.rglob("*")) == before


def test_a_job_that_loses_its_turn_on_the_way_keeps_what_it_finished_before(tmp_path):
    one, _ = planned(tmp_path)
    turn = Layout(tmp_path).turn
    token = take_turn(turn, submits=True).token
    state = Layout(tmp_path)

    def check() -> None:
        check_turn(turn, token)
        if list(state.solved.rglob("*.case")):
            take_turn(turn, submits=True)

    with pytest.raises(CampaignHeld):
        jobs.solve(one.spec(), tmp_path, check=check)
    assert len(list(state.solved.rglob("*.case"))) == 1
    assert not state.case_file(one.name).exists()


def test_a_job_whose_time_is_up_is_resumed_and_at_last_fails_its_case(tmp_path):
    one, _ = planned(tmp_path)
    up = Limits(granted_until=time.monotonic())
    with pytest.raises(TimeGrantedIsUp):
        jobs.solve(one.spec(), tmp_path, limits=up)
    assert list(Layout(tmp_path).solved.rglob("*.case")) == []
    with pytest.raises(TimeGrantedIsUp):
        jobs.solve(one.spec(), tmp_path, limits=up, last_attempt=True)
    # One case a run: the next ones have not had their chance.
    (path,) = Layout(tmp_path).solved.rglob("*.case")
    (given_up,) = read_records(path)
    assert given_up.digest == one.cases[0][0]
    assert (given_up.status, reason_of(given_up.warning_flags).number) == (FAILED, 3)
    jobs.solve(one.spec(), tmp_path)
    assert [record.status == FAILED for record in records_of(tmp_path, one)] == [True, False]


def test_a_case_that_takes_more_memory_than_granted_fails_with_its_number(tmp_path):
    one, _ = planned(tmp_path)
    jobs.solve(one.spec(), tmp_path, limits=Limits(granted_bytes=2**20))
    for record in records_of(tmp_path, one):
        assert (record.status, reason_of(record.warning_flags).number) == (FAILED, 2)


def test_the_case_at_work_in_a_job_that_slurm_killed_fails_and_the_others_go_on(tmp_path):
    graph = Graph.open(config(tmp_path, count=8), tmp_path / "results")
    graph.prepare()
    name = next(job for job in graph.jobs if job.startswith("anchors"))
    (first, _), (second, x), *_ = graph.jobs[name].cases
    assert not fail_case_at_work(graph, name, "no_memory")  # it never reported
    beat = Heartbeat(name, "anchors", RUNNING, 1, 4, size_parameter=x)
    write_heartbeat(graph.layout.folder, beat)
    assert not fail_case_at_work(graph, name, "no_memory")  # the case is not known
    write_heartbeat(graph.layout.folder, replace(beat, case=second))
    assert fail_case_at_work(graph, name, "no_memory")
    assert not fail_case_at_work(graph, name, "no_memory")  # no second time
    jobs.solve(graph.specs[name], graph.layout.folder)
    records = {record.digest: record for record in read_records(graph.layout.case_file(name))}
    assert [digest for digest, record in records.items() if record.status == FAILED] == [second]
    assert reason_of(records[second].warning_flags).number == 2
    assert records[first].status != FAILED
    (note,) = read_failures(graph.layout.failed)
    assert (note.digest, note.size_parameter, note.job) == (second, x, name)
    assert take_up_failed(graph) == 1


def test_requests_grow_with_the_attempt():
    long = Planned("span", (), 10, 3600.0, "", ("plate",), 4000)
    assert [long.request_mb(n) for n in (1, 2)] == [512 + 5000, 512 + 10000]
    assert [long.request_minutes(n) for n in (1, 2)] == [15 + 240, 15 + 480]


def test_the_cluster_profile_tries_as_often_as_the_solver_thinks():
    content = YAML(typ="safe", pure=True).load((PROFILES / "slurm" / "config.yaml").read_text())
    assert content["retries"] + 1 == ATTEMPTS


# As Slurm 22.05 wrote it when a job took too much memory, and when it took too long.
MEMORY = """\
slurmstepd-vm: error: StepId=1.0 exceeded memory limit (313712640 > 104857600), being killed
slurmstepd-vm: error: Exceeded job memory limit
srun: Job step aborted: Waiting up to 12 seconds for job step to finish.
srun: error: vm: task 0: Killed
"""
ENDED = "slurmstepd-vm: error: *** JOB 3 ON vm CANCELLED AT 2026-12-01T11:00:00"
TIME = f"{ENDED} DUE TO TIME LIMIT ***\n"
CANCELLED = f"{ENDED} ***\n"


@pytest.mark.parametrize(
    ("log", "reason"),
    [
        (MEMORY, "no_memory"),
        ("slurmstepd: error: Detected 1 oom_kill event in StepId=7.batch.\n", "no_memory"),
        (TIME, "no_time"),
        (CANCELLED, None),
        ("scatterloom: out of memory\n", None),
        ("", None),
    ],
)
def test_only_slurm_says_what_limit_a_job_went_over(log, reason):
    assert _slurm.limit_exceeded(_slurm.own_words(f"some words of the job\n{log}")) == reason


@pytest.fixture
def programs(tmp_path, monkeypatch):
    """A folder of programs that stand for Slurm's."""
    folder = tmp_path / "programs"
    folder.mkdir()
    monkeypatch.setenv("PATH", str(folder))

    def add(name: str, text: str) -> None:
        path = folder / name
        path.write_text(f"#!/bin/sh\n{text}\n")
        path.chmod(0o755)

    return add


def test_jobs_are_found_by_the_beginning_of_their_names(programs):
    programs("squeue", "echo 7 scatterloom-a_1; echo 12 other; echo 5 scatterloom-a_2; echo 9")
    assert _slurm.jobs_left(["scatterloom-a", "scatterloom-b"]) == ["5", "7"]
    assert _slurm.jobs_left([]) == []


def test_jobs_that_do_not_end_are_named(programs):
    programs("squeue", "echo 7 scatterloom-a_1")
    programs("scancel", "exit 0")
    with pytest.raises(EnvironmentProblem, match="1 Slurm jobs of an earlier run do not end: 7"):
        _slurm.cancel(["scatterloom-a"], patience=0.0)


def test_without_an_answer_nothing_is_started(programs):
    with pytest.raises(EnvironmentProblem, match="there is no program squeue here"):
        _slurm.cancel(["scatterloom-a"])
    programs("squeue", "echo slurm_load_jobs error: Unable to contact slurm controller >&2; exit 1")
    with pytest.raises(EnvironmentProblem, match="Unable to contact"):
        _slurm.cancel(["scatterloom-a"])


@pytest.mark.parametrize(
    ("accounts", "age", "expected"),
    [
        ("accounting_storage/none", 300, "squeue"),
        ("(null)", 300, "squeue"),
        ("accounting_storage/slurmdbd", 5, "sacct"),
        ("accounting_storage/none", 5, None),
    ],
)
def test_the_program_that_tells_how_jobs_fare(programs, accounts, age, expected):
    text = f"AccountingStorageType = {accounts}\\nMinJobAge = {age} sec\\n"
    programs("scontrol", f"printf '{text}'")
    programs("sacct", "exit 0")
    if expected is not None:
        assert _slurm.status_command() == expected
    else:
        with pytest.raises(EnvironmentProblem, match="forgets jobs 5 s after their end"):
            _slurm.status_command()


def test_profiles_are_found_by_name_and_by_folder(tmp_path, programs):
    assert not find_profile("laptop", PROFILES).remote
    with pytest.raises(EnvironmentProblem, match="no program sbatch"):
        find_profile("slurm", PROFILES)
    programs("sbatch", "exit 0")
    assert find_profile("slurm", PROFILES).slurm
    own = tmp_path / "own"
    own.mkdir()
    (own / "config.yaml").write_text("executor: slurm\njobs: 3\n")
    found = find_profile(str(own), PROFILES)
    assert (found.name, found.slurm, found.folder) == ("own", True, own)
    (own / "config.yaml").write_text("executor: no-such\n")
    with pytest.raises(EnvironmentProblem, match="snakemake-executor-plugin-no-such"):
        find_profile(str(own), PROFILES)
    for text in ("executor: [a]\n", "- a\n", "a: [\n", "\x00"):
        (own / "config.yaml").write_text(text)
        with pytest.raises(BadInput, match=re.escape(str(own / "config.yaml"))):
            find_profile(str(own), PROFILES)
    with pytest.raises(BadInput, match="no profile 'nowhere'"):
        find_profile("nowhere", PROFILES)
