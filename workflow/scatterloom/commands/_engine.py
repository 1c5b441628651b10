"""Starts, ends and questions the workflow engine, whose own words go to a log."""

from __future__ import annotations

import contextlib
import importlib.util
import json
import os
import re
import signal
import subprocess
import sys
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from scatterloom.commands._parent import ask_kernel
from scatterloom.errors import EnvironmentProblem
from scatterloom.graph import Graph
from scatterloom.limits import SHARE_OF_MEMORY, machine_bytes
from scatterloom.store.layout import checkout

GRACE_S = 10.0
"""Time that the engine gets to end by itself before it is killed [s]."""
LOGS_KEPT = 20
PROFILES = ("laptop", "slurm")
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
    """

    rule: str
    log: str
    exit_code: int | None
    killed_by: str | None


class Engine:
    """The workflow engine at work on a campaign, with all its children in one session.

    Parameters
    ----------
    graph : Graph
    config : Path
        The campaign file.
    cores : int
    profile : str
        One of `PROFILES`.
    lock : int
        Descriptor of the campaign's lock. The engine inherits it, so that the campaign
        stays held if this process dies before the engine does.
    """

    def __init__(self, graph: Graph, config: Path, cores: int, profile: str, lock: int) -> None:
        top = checkout()
        if top is None:
            raise EnvironmentProblem(
                "a campaign runs from a checkout of scatterloom (its Snakefile is not found)"
            )
        memory = max(1, int(SHARE_OF_MEMORY * machine_bytes() / 2**20))
        self.log = _new_log(graph.layout.logs)
        command = [
            *(sys.executable, "-m", "snakemake"),
            *("--snakefile", str(top / "Snakefile")),
            *("--directory", str(graph.layout.folder)),
            # "none" keeps a profile of the user's own environment out.
            *("--profile", "none"),
            *("--workflow-profile", str(top / "workflow" / "profiles" / profile)),
            *("--cores", str(cores)),
            *("--nolock", "--rerun-incomplete", "--nocolor"),
            *("--config", f"campaign={_yaml(config)}", f"results={_yaml(_results(graph))}"),
            *("prepared=true", f"memory_mb={memory if profile == 'laptop' else 1 << 40}"),
            # On a cluster the nodes have the memory, and the requests of the jobs count.
            *(("--resources", f"mem_mb={memory}") if profile == "laptop" else ()),
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
                env=os.environ | {"PYTHONUNBUFFERED": "1"},
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
            self._signal(signal.SIGTERM)
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
            elif match := re.match(r" +log: (\S+) \(check log", words):
                failed[match[1]] = FailedRule(rule, match[1], code, killer)
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


def check_profile(name: str) -> None:
    """Raise EnvironmentProblem if a profile needs what is not installed."""
    if name == "slurm" and importlib.util.find_spec("snakemake_executor_plugin_slurm") is None:
        raise EnvironmentProblem(
            "the slurm profile needs the package snakemake-executor-plugin-slurm, which is not "
            "installed; add it to .venv with pip"
        )


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
