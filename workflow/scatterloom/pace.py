"""How fast this machine is, beside the one the cost model was fitted to, and how sure that is.

The cost model (`campaign.effort.cost`) knows the shape of the cost; its scale is measured:
by a short self-calibration before anything is solved, and by the finished cases afterwards.
"""

from __future__ import annotations

import hashlib
import json
import math
import os
import platform
import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict, dataclass
from pathlib import Path

from scatterloom.campaign import effort
from scatterloom.errors import EnvironmentProblem
from scatterloom.outline import Planned
from scatterloom.store.atomic import atomic_write
from scatterloom.store.progress import Heartbeat

CALIBRATION_S = 30.0
_TRUSTED_CASES = 20
_COVERAGE = 2.0


@dataclass(frozen=True)
class Pace:
    """Actual over predicted time.

    Attributes
    ----------
    ratio : float
    relative_error : float
        Half width (95 %) of a prediction of much work, over the prediction.
    source : str
        What it was measured on.
    """

    ratio: float
    relative_error: float
    source: str


UNKNOWN = Pace(1.0, 1.0, "the developers' machine; not measured here")


def pace_of(pairs: Sequence[tuple[float, float]], source: str) -> Pace | None:
    """Return the pace from pairs of (predicted, actual) seconds, or None if there are none.

    The error is that of the mean ratio, from its scatter between pairs, and a tenth of the
    scatter itself for what the pairs do not represent; with one pair it is all.
    """
    pairs = [(p, a) for p, a in pairs if p > 0.0 and a > 0.0]
    if not pairs:
        return None
    ratio = math.fsum(a for _, a in pairs) / math.fsum(p for p, _ in pairs)
    if len(pairs) == 1:
        return Pace(ratio, 1.0, source)
    whole = math.fsum(p for p, _ in pairs)
    scatter = math.sqrt(math.fsum(p * (a / p / ratio - 1.0) ** 2 for p, a in pairs) / whole)
    error = _COVERAGE * scatter * (1.0 / math.sqrt(len(pairs) - 1) + 0.1)
    return Pace(ratio, error, source)


def pace_of_jobs(
    jobs: Mapping[str, Planned], heartbeats: Iterable[Heartbeat]
) -> tuple[Pace, int] | None:
    """Return the pace of a campaign's finished cases and their number, if there are enough."""
    pairs, cases = [], 0
    for beat in heartbeats:
        job = jobs.get(beat.job)
        if job is not None and beat.solved:
            pairs.append((job.seconds * beat.solved / job.cases, beat.seconds))
            cases += beat.solved
    found = pace_of(pairs, f"{cases} finished cases of this campaign")
    return (found, cases) if found is not None and cases >= _TRUSTED_CASES else None


def calibrated(path: Path | None = None) -> Pace | None:
    """Return the pace that an earlier calibration of this machine found, or None."""
    try:
        content = json.loads((path or cache_file()).read_bytes())
        if content.pop("machine") != machine():
            return None
        pace = Pace(**content)
        return pace if pace.ratio > 0.0 else None
    except (OSError, ValueError, TypeError, KeyError, AttributeError):
        return None


def calibrate(path: Path | None = None, seconds: float = CALIBRATION_S) -> Pace:
    """Solve some small cases, compare with the cost model, and remember the result.

    Parameters
    ----------
    path : Path, optional
        Where to remember it; in the user's cache folder if missing.
    seconds : float
        No further case is begun after this time.

    Raises
    ------
    EnvironmentProblem
        If the result cannot be written.
    """
    from scatterloom.attempts import Task, solve_case
    from scatterloom.particle.shapes import from_spec
    from scatterloom.scattering.case import Asked

    index, accuracy = 1.5 + 0.01j, Asked(0.02, 0.01, 0.005)
    began = time.monotonic()
    pairs = []
    # The first one compiles what is to be compiled, and does not count.
    samples = [(1.0, 0.3), (1.0, 1.0), (2.0, 1.0), (1.0, 2.0), (2.0, 2.0), (1.0, 3.5), (2.0, 3.5)]
    for number, (flatness, x) in enumerate(samples):
        if number > 2 and time.monotonic() - began > seconds:
            break
        spec = {"kind": "spheroid", "equatorial_to_polar": flatness}
        body, shape = from_spec(spec), json.dumps(spec)
        a, b, c = (float(extent) for extent in body.half_extents)
        cells = effort.levels((a, b, c), index, x)
        tolerance = effort.operator_tolerance(accuracy.ratio_absolute)
        task = Task("", "anchors", body, shape, index, cells, 0, tolerance, accuracy, 1)
        start = time.perf_counter()
        solve_case(task, "", x, [], lambda size, residual: None)
        if number:
            predicted = effort.cost((a, b, c), index, x, cold=True)
            pairs.append((predicted, time.perf_counter() - start))
    pace = pace_of(pairs, f"a calibration of this machine with {len(pairs)} cases")
    assert pace is not None
    target = path or cache_file()
    try:
        with atomic_write(target, durable=False) as stream:
            stream.write(json.dumps(asdict(pace) | {"machine": machine()}).encode())
    except OSError as error:
        raise EnvironmentProblem(
            f"{target}: {error.strerror}; the calibration cannot be kept\n"
            "  hint: set XDG_CACHE_HOME to a folder that can be written, or use --no-calibration"
        ) from None
    return pace


def cache_file() -> Path:
    """Where the calibration of this machine is remembered."""
    given = os.environ.get("XDG_CACHE_HOME")
    folder = Path(given) if given else Path.home() / ".cache"
    return folder / "scatterloom" / "pace.json"


def machine() -> str:
    """Digest of what the pace depends on: processor, system, and the cost model itself."""
    try:
        text = Path("/proc/cpuinfo").read_text()
        names = {line.split(":", 1)[1] for line in text.splitlines() if "model name" in line}
    except OSError:
        names = {platform.processor()}
    parts = [*sorted(names), platform.node(), platform.machine(), str(effort.NUMERICS_REVISION)]
    parts.append(Path(effort.__file__).read_text(encoding="utf-8"))
    return hashlib.sha256("\n".join(parts).encode()).hexdigest()[:16]
