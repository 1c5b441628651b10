"""What the workflow engine writes of failures is understood, and children end with parents."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from scatterloom.commands._engine import Engine, FailedRule
from scatterloom.store.atomic import is_alive

# As Snakemake 9.27 writes it, shortened.
LOG = """\
rule solve_anchors:
    output: cases/anchors-a.cases, fields/anchors-a.npz
RuleException:
CalledProcessError in file "solve.smk", line 44:
Command 'set -euo pipefail;  exec solve-job' returned non-zero exit status 3.
[Tue Dec  1 06:16:45 2026]
Error in rule solve_anchors:
    message: None
    jobid: 5
    output: cases/anchors-a.cases, fields/anchors-a.npz
    log: state/logs/jobs/anchors-a.log (check log file(s) for error details)
    shell:
        exec solve-job
        (command exited with non-zero exit code)
Trying to restart job 5.
rule solve_span:
RuleException:
CalledProcessError in file "solve.smk", line 44:
Command 'set -euo pipefail;  exec solve-job' died with <Signals.SIGKILL: 9>.
Error in rule solve_span:
    jobid: 6
    log: state/logs/jobs/span-b.log (check log file(s) for error details)
Error in rule solve_span:
    message: SLURM-job '3' failed, SLURM status is: 'FAILED'.
    log: state/logs/jobs/span-c.log, BATCH LOG (check log file(s) for error details)
localrule gather_table:
WorkflowError:
At least one job did not complete successfully.
"""


@pytest.fixture
def engine(tmp_path):
    engine = Engine.__new__(Engine)
    engine.log = tmp_path / "engine.log"
    batch = tmp_path / "slurm logs" / "3.log"
    batch.parent.mkdir()
    batch.write_text("rule solve_span:\nslurmstepd: error: Exceeded job memory limit\n")
    engine.log.write_text(LOG.replace("BATCH LOG", str(batch)))
    return engine


def test_failures_are_read_with_their_codes_and_signals(engine, tmp_path):
    batch = tmp_path / "slurm logs" / "3.log"
    failed = engine.failures()
    assert failed == [
        FailedRule("solve_anchors", "state/logs/jobs/anchors-a.log", 3, None),
        FailedRule("solve_span", "state/logs/jobs/span-b.log", None, "SIGKILL"),
        FailedRule("solve_span", "state/logs/jobs/span-c.log", None, None, str(batch)),
    ]
    assert [failure.over_limit for failure in failed] == [None, None, "no_memory"]
    assert failed[-1].words_of_slurm() == ["slurmstepd: error: Exceeded job memory limit"]


def test_the_last_rule_and_the_last_words(engine):
    assert engine.current_rule() == "gather_table"
    assert engine.last_words(1) == ["At least one job did not complete successfully."]
    engine.log.write_text("")
    assert engine.current_rule() is None
    assert engine.failures() == []


# A parent that starts a child of the kind under test and waits.
PARENT = """
import subprocess, sys, time
child = subprocess.Popen([sys.executable, "-c", sys.argv[1], str(__import__("os").getpid())])
print(child.pid, flush=True)
time.sleep(60)
"""
CHILD = """
import sys, time
from scatterloom.commands import _parent
if {watch}:
    _parent.ask_kernel = lambda: False
    _parent.LOOK_EVERY_S = 0.05
_parent.end_with_parent(int(sys.argv[1]))
open({ready!r}, "w").close()
time.sleep(60)
"""


@pytest.mark.parametrize("watch", [False, True], ids=["kernel", "watching"])
def test_a_solver_ends_when_its_parent_is_killed(tmp_path, watch):
    ready = tmp_path / "ready"
    child_code = CHILD.format(watch=watch, ready=str(ready))
    with subprocess.Popen(
        [sys.executable, "-c", PARENT, child_code], stdout=subprocess.PIPE, text=True
    ) as parent:
        child = int(parent.stdout.readline())
        wait(ready.exists)
        assert is_alive(child)
        parent.send_signal(signal.SIGKILL)
    wait(lambda: not is_alive(child))


def test_a_solver_whose_parent_is_gone_already_does_not_start():
    code = CHILD.format(watch=False, ready=os.devnull)
    # A number that is not its parent's.
    done = subprocess.run([sys.executable, "-c", code, "1"], check=False, timeout=60)
    assert done.returncode == 130


def wait(condition) -> None:
    deadline = time.monotonic() + 30
    while not condition():
        assert time.monotonic() < deadline
        time.sleep(0.02)


def test_rules_stay_short_and_paths_relative():
    """Style: a rules file is under 200 lines and names no absolute path."""
    rules = Path(__file__).parents[2] / "workflow" / "rules"
    files = sorted(rules.glob("*.smk"))
    assert [f.stem for f in files] == ["bulk", "expand", "figures", "gather", "solve"]
    for file in files:
        text = file.read_text()
        assert text.count("\n") < 200
        assert '"/' not in text
