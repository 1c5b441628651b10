"""Starts the command line as a user does, and waits for what it writes."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

# Coarse lattices and small particles: a case takes some hundredths of a second. The accuracy
# asked is beyond such lattices, so every case is flagged.
CONFIG = """\
campaign: tiny
title: A campaign for tests
wavelengths_um: [0.5, 1.0]
materials:
  silt: {n: 1.5, k: 0.01}
particles:
  - {name: plate, material: silt, shape: {kind: spheroid, equatorial_to_polar: 2.0}}
sizes:
  size_parameter: {from: 0.4, to: 1.6, count: COUNT}
angles_deg: {from: 0, to: 180, step: 10}
accuracy: {f11_relative: 0.001, ratio_absolute: 0.001, efficiency_relative: 0.0005}
solver: {levels: [8, 12], tolerance: 1e-4, job_seconds: 1.0}
"""
COUNT = 40
PATIENCE_S = 240.0


def config(folder: Path, count: int = COUNT) -> Path:
    path = folder / "tiny.yaml"
    path.write_text(CONFIG.replace("COUNT", str(count)))
    return path


def start(command: str, *arguments: object) -> subprocess.Popen[str]:
    """Start `scatterloom COMMAND` as the leader of a process group of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "scatterloom", command, *map(str, arguments)],
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
        env=os.environ | {"NO_COLOR": "1"},
    )


def finish(process: subprocess.Popen[str]) -> subprocess.CompletedProcess[str]:
    out, err = process.communicate(timeout=PATIENCE_S)
    return subprocess.CompletedProcess(process.args, process.returncode, out, err)


def call(command: str, *arguments: object) -> subprocess.CompletedProcess[str]:
    return finish(start(command, *arguments))


def solved_cases(campaign: Path) -> dict[str, tuple[int, int]]:
    """Every case kept so far, with the identity and the time of its file."""
    found = {}
    for path in campaign.glob("state/cases/*/*.case"):
        state = path.stat()
        found[path.stem] = (state.st_ino, state.st_mtime_ns)
    return found


def wait_until(condition: Callable[[], bool], process: subprocess.Popen[str]) -> None:
    """Wait for a condition that must come before the process ends."""
    deadline = time.monotonic() + PATIENCE_S
    while not condition():
        if process.poll() is not None:
            out, err = process.communicate()
            raise AssertionError(f"ended with {process.returncode} too early\n{out}\n{err}")
        if time.monotonic() > deadline:
            process.kill()
            raise AssertionError("waited in vain")
        time.sleep(0.01)


def processes_on(folder: Path) -> list[str]:
    """Command lines of living processes that work in or on a folder (Linux)."""
    found = []
    for entry in Path("/proc").iterdir():
        if not entry.name.isdigit():
            continue
        try:
            words = (entry / "cmdline").read_bytes().replace(b"\0", b" ").decode()
            where = os.readlink(entry / "cwd")
        except OSError:
            continue
        if words and (str(folder) in words or where.startswith(str(folder))):
            found.append(words)
    return found
