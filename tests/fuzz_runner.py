"""Fuzz targets one after the other, each in a process of its own: `scripts/fuzz` calls this.

Findings are grouped by the kind of error and the place in the program where it arose.
"""

from __future__ import annotations

import hashlib
import json
import os
import random
import subprocess
import sys
import tempfile
import time
import traceback
from collections import Counter
from pathlib import Path
from typing import Any

FINDINGS = Path("fuzz-findings")
_GRACE_S = 120.0


class Record:
    """Counts inputs and keeps the first that fails in each way; written as it goes."""

    def __init__(self, name: str, path: Path) -> None:
        self._name, self._path = name, path
        self._counts: Counter[str] = Counter()
        self._found: dict[str, str] = {}

    def take(self, content: bytes) -> None:
        from fuzz_targets import TARGETS, attempt

        with tempfile.TemporaryDirectory() as folder:
            try:
                self._counts[attempt(TARGETS[self._name], content, Path(folder))] += 1
            except Exception as error:
                self._counts["broke"] += 1
                self._keep(error, content)
        if sum(self._counts.values()) % 50 == 1:
            self.write()

    def _keep(self, error: Exception, content: bytes) -> None:
        frames = traceback.extract_tb(error.__traceback__)
        own = [f for f in frames if "scatterloom" in f.filename] or frames
        place = f"{type(error).__name__} in {Path(own[-1].filename).name}:{own[-1].lineno}"
        if place not in self._found:
            self._found[place] = str(error)[:200]
            FINDINGS.mkdir(exist_ok=True)
            digest = hashlib.sha256(content).hexdigest()[:12]
            (FINDINGS / f"{self._name}-{digest}").write_bytes(content)
            self.write()

    def write(self) -> None:
        self._path.write_text(json.dumps({"counts": self._counts, "found": self._found}))


def _at_random(name: str, seconds: float, record: Record) -> None:
    from fuzz_mutation import PIECES
    from fuzz_targets import TARGETS

    chance, good = random.Random(1), TARGETS[name].seeds()
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        content = bytearray(chance.choice(good))
        for _ in range(chance.randint(1, 4)):
            at = chance.randint(0, len(content))
            content[at : at + chance.randint(0, 8)] = chance.choice((*PIECES, chance.randbytes(3)))
        record.take(bytes(content))
    record.write()


def _guided(atheris: Any, name: str, seconds: float, scratch: Path, record: Record) -> None:
    from fuzz_targets import TARGETS

    corpus = scratch / f"corpus-{name}"
    corpus.mkdir()
    for number, seed in enumerate(TARGETS[name].seeds()):
        (corpus / str(number)).write_bytes(seed)
    limits = [f"-max_total_time={round(seconds)}", "-timeout=60", "-rss_limit_mb=4096"]
    artifacts = f"-artifact_prefix={scratch}/"
    atheris.Setup(
        [sys.argv[0], *limits, artifacts, "-max_len=20000", "-verbosity=0", str(corpus)],
        record.take,
    )
    atheris.Fuzz()


def one(name: str, seconds: float, scratch: Path) -> None:
    """Fuzz one target in this process."""
    record = Record(name, scratch / f"{name}.json")
    try:
        import atheris
    except ImportError:
        _at_random(name, seconds, record)
        return
    with atheris.instrument_imports(include=["scatterloom"]):
        import fuzz_targets  # noqa: F401
    _guided(atheris, name, seconds, scratch, record)


def main(scratch: Path, seconds: float, names: list[str]) -> int:
    """Fuzz all targets and tell what was found; 1 if anything broke."""
    from fuzz_targets import TARGETS

    inputs, broken = 0, 0
    for name in names or TARGETS:
        command = [sys.executable, __file__, str(scratch), str(seconds), "--one", name]
        log = scratch / f"{name}.log"
        with open(log, "wb") as stream:
            code: int | str
            try:
                done = subprocess.run(
                    command, stdout=stream, stderr=stream, timeout=2 * seconds + _GRACE_S
                )
                code = done.returncode
            except subprocess.TimeoutExpired:
                code = "no end"
        state = scratch / f"{name}.json"
        told = json.loads(state.read_text()) if state.exists() else {"counts": {}, "found": {}}
        count = sum(told["counts"].values())
        inputs += count
        print(f"{name}: {count} inputs {told['counts']}", flush=True)
        for place, message in told["found"].items():
            broken += 1
            print(f"  broke: {place}: {message}", flush=True)
        if code != 0 or not count:
            broken += 1
            print(f"  the process ended with {code}: {_last(log)}", flush=True)
    print(f"{inputs} inputs in all, {broken} ways to break")
    return 1 if broken else 0


def _last(log: Path) -> str:
    lines = log.read_text(errors="replace").splitlines()
    return " | ".join(line for line in lines[-6:] if line.strip())


if __name__ == "__main__":
    place, duration, *rest = sys.argv[1:]
    if rest[:1] == ["--one"]:
        os.environ["SCATTERLOOM_CASE_REUSE"] = "off"
        one(rest[1], float(duration), Path(place))
        sys.stdout.flush()
        os._exit(0)
    sys.exit(main(Path(place), float(duration), rest))
