"""Starts, ends and questions the workflow engine, whose own words go to a log."""

from __future__ import annotations

import contextlib
import json
import os
import re
import signal
import subprocess
import sys
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from scatterloom.commands import _slurm
from scatterloom.commands._parent import ask_kernel
from scatterloom.commands._profile import Profile
from scatterloom.graph import Graph
from scatterloom.limits import SHARE_OF_MEMORY, all_cores, machine_bytes
from scatterloom.store.turn import Turn, job_name

GRACE_S = 10.0
"""Time that the engine gets to end by itself before it is killed [s]."""
LOGS_KEPT = 20
_LOG_TAIL_BYTES = 1 << 22
_RECENT_BYTES = 1 << 16


@dataclass(frozen=True)
class FailedRule:
    """A job that the engine reports as failed.

    Attributes
    ----------
    rule, log : str
        The log by its path within the campaign's folder.
    exit_code : int or None
        None if it is not known, as of a killed job.
    killed_by : str or None
        Name of the signal that killed it.
    batch_log : str or None
        The log that a cluster's batch system keeps of it.
    """

    rule: str
    log: str
    exit_code: int | None
    killed_by: str | None
    batch_log: str | None = None

    @property
    def over_limit(self) -> str | None:
        """Return "no_memory" or "no_time" if Slurm ended it for that."""
        return _slurm.limit_exceeded(self.words_of_slurm())

    def words_of_slurm(self) -> list[str]:
        """Return what Slurm itself wrote to its log of the job."""
        try:
            log = Path(self.batch_log or os.devnull).read_text(errors="replace")
        except OSError:
            return []
        return _slurm.own_words(log)


class Engine:
    """The workflow engine at work on a campaign, with all its children in one session.

    Parameters
    ----------
    graph : Graph
    config : Path
        The campaign file.
    top : Path
        The checkout.
    cores : int or None
        Cores to use at a time; None for all of this machine, or as many of other
        machines as there are jobs.
    threads : int
        Of every solver job.
    profile : Profile
    turn : Turn
        Of this run.
    lock : int
        Descriptor of the campaign's lock. The engine inherits it, so that the campaign
        stays held if this process dies before the engine does.
    """

    def __init__(
        self,
        graph: Graph,
        config: Path,
        top: Path,
        cores: int | None,
        threads: int,
        profile: Profile,
        turn: Turn,
        lock: int,
    ) -> None:
        self._profile = profile
        self.log = _new_log(graph.layout.logs)
        command = [
            *(sys.executable, "-m", "snakemake"),
            *("--snakefile", str(top / "Snakefile")),
            *("--directory", str(graph.layout.folder)),
            # "none" keeps a profile of the user's own environment out.
            *("--profile", "none"),
            *("--workflow-profile", str(profile.folder)),
            *("--nolock", "--rerun-incomplete", "--nocolor"),
            *_placement(profile, cores, turn),
            *("--config", f"campaign={_yaml(config)}", f"results={_yaml(_results(graph))}"),
            *("prepared=true", f"turn=t{turn.token}", f"threads={threads}"),
            f"cluster={json.dumps(profile.remote)}",
            *(() if profile.remote else (f"memory_mb={_memory_mb()}",)),
        ]
        with open(self.log, "wb") as stream:
            self._process = subprocess.Popen(
                command,
                stdin=subprocess.DEVNULL,
                stdout=stream,
                stderr=subprocess.STDOUT,
                start_new_session=True,
                pass_fds=(lock,),
                preexec_fn=ask_kernel,
                # A terminal's interrupt reaches this process alone, which then ends the session.
                env=_environment(profile, top),
            )

    def poll(self) -> int | None:
        """Return the engine's exit code, or None while it is at work."""
        return self._process.poll()

    def wait(self, seconds: float) -> int | None:
        """Wait so long for the engine to end; return its exit code or None."""
        with contextlib.suppress(subprocess.TimeoutExpired):
            return self._process.wait(seconds)
        return None

    def stop(self) -> None:
        """End the engine and all its children, first kindly, then at once.

        An engine that has ended has no children left: they end with it.
        """
        if self.poll() is not None:
            return
        try:
            # At the one the engine waits for jobs elsewhere, at the other it cancels them.
            self._signal(signal.SIGINT if self._profile.remote else signal.SIGTERM)
            self.wait(GRACE_S)
        finally:
            # Also when a second interrupt comes while waiting.
            self._signal(signal.SIGKILL)
            self._process.wait()

    def _signal(self, number: signal.Signals) -> None:
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(self._process.pid, number)

    def current_rule(self) -> str | None:
        """Return the rule that was started last."""
        text = self._tail(_RECENT_BYTES)
        found = re.findall(r"^(?:local)?rule (\w+):", text, re.MULTILINE)
        return found[-1] if found else None

    def failures(self) -> list[FailedRule]:
        """Return the jobs that the log reports as failed, the last report of each."""
        failed: dict[str, FailedRule] = {}
        rule = ""
        code: int | None = None
        killer: str | None = None
        for words in self._tail().splitlines():
            # How the command ended stands before the report of the job.
            if match := re.search(r"returned non-zero exit status (\d+)", words):
                code, killer = int(match[1]), None
            elif match := re.search(r"died with <Signals\.(\w+)", words):
                code, killer = None, match[1]
            elif match := re.match(r"Error in rule (\w+):", words):
                rule = match[1]
            elif match := re.match(r" +log: (.+) \(check log", words):
                log, _, batch = match[1].partition(", ")
                failed[log] = FailedRule(rule, log, code, killer, batch or None)
                code = killer = None
        return list(failed.values())

    def last_words(self, lines: int = 5) -> list[str]:
        """Return the last lines of the engine's log, for failures outside any job."""
        return [line for line in self._tail().splitlines() if line.strip()][-lines:]

    def _tail(self, size: int = _LOG_TAIL_BYTES) -> str:
        with open(self.log, "rb") as stream:
            stream.seek(0, os.SEEK_END)
            stream.seek(max(0, stream.tell() - size))
            return stream.read().decode(errors="replace")


def _placement(profile: Profile, cores: int | None, turn: Turn) -> list[str]:
    """Arguments that say how many jobs go where."""
    if not profile.remote:
        some = ["--cores", str(cores or all_cores())]
        return [*some, "--resources", f"mem_mb={_memory_mb()}"]
    # On a cluster the nodes have the memory, and the requests of the jobs count.
    some = ["--cores", str(cores)] if cores else []
    if profile.slurm:
        some += ["--slurm-jobname-prefix", job_name(turn.token)]
        some += ["--slurm-status-command", _slurm.status_command()]
        if wanted := _slurm.site_resources():
            some += ["--default-resources", *wanted]
    return some


def _environment(profile: Profile, top: Path) -> dict[str, str]:
    environment = os.environ | {"PYTHONUNBUFFERED": "1"}
    if profile.slurm and "SLURM_CONF" in environment:
        programs = top / "workflow" / "profiles" / "slurm" / "programs"
        # Beyond the engine's reach, which drops Slurm's variables from the steps of a job.
        environment["SCATTERLOOM_SLURM_CONF"] = environment["SLURM_CONF"]
        environment["PATH"] = f"{programs}{os.pathsep}{environment.get('PATH', os.defpath)}"
    return environment


def _memory_mb() -> int:
    return max(1, int(SHARE_OF_MEMORY * machine_bytes() / 2**20))


def _results(graph: Graph) -> Path:
    return graph.layout.folder.parent


def _yaml(path: Path) -> str:
    # The engine parses values given to --config as YAML, of which a JSON string is one.
    return json.dumps(str(path.absolute()))


def _new_log(folder: Path) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    for old in sorted(folder.glob("engine-*.log"))[: -LOGS_KEPT + 1]:
        old.unlink(missing_ok=True)
    stamp = datetime.now(UTC).strftime("%Y%m%dT%H%M%S.%f")
    return folder / f"engine-{stamp}.log"
