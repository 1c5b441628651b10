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
from scatterloom.store.layout import checkout

GRACE_S = 10.0
"""Time that the engine gets to end by itself before it is killed [s]."""
LOGS_KEPT = 20
PROFILES = ("laptop", "slurm")
_LOG_TAIL_BYTES = 1 << 22


@dataclass(frozen=True)
class FailedRule:
    """A job that the engine reports as failed: its rule, its log, its exit code if known."""

    rule: str
    log: str
    exit_code: int | None


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
        """End the engine and all its children, first kindly, then at once."""
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
        found = re.findall(r"^(?:local)?rule (\w+):", self._tail(), re.MULTILINE)
        return found[-1] if found else None

    def failures(self) -> list[FailedRule]:
        """Return the jobs that the log reports as failed for good, the last report of each."""
        text = self._tail()
        failed: dict[str, FailedRule] = {}
        for block in re.split(r"^(?=Error in rule |RuleException|WorkflowError)", text, flags=re.M):
            match = re.match(r"Error in rule (\w+):", block)
            if match is None:
                continue
            log = re.search(r"^ +log: (\S+)", block, re.MULTILINE)
            code = re.search(r"non-zero exit (?:status|code) (\d+)", block)
            name = log[1] if log else match[1]
            failed[name] = FailedRule(match[1], name, int(code[1]) if code else None)
        return list(failed.values())

    def last_words(self, lines: int = 5) -> list[str]:
        """Return the last lines of the engine's log, for failures outside any job."""
        return [line for line in self._tail().splitlines() if line.strip()][-lines:]

    def _tail(self) -> str:
        with open(self.log, "rb") as stream:
            stream.seek(0, os.SEEK_END)
            stream.seek(max(0, stream.tell() - _LOG_TAIL_BYTES))
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
