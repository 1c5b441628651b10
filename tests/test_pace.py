"""The speed of a machine from pairs of predicted and actual times: its logic, nothing is timed."""

from __future__ import annotations

import dataclasses
import json
import math

import numpy as np
import pytest

from scatterloom import attempts, pace
from scatterloom.errors import EnvironmentProblem
from scatterloom.outline import Planned
from scatterloom.store.progress import DONE, Heartbeat


def planned(seconds: float, cases: int) -> Planned:
    return Planned("span", (), cases, seconds, "", (), 1)


def beat(job: str, solved: int, seconds: float) -> Heartbeat:
    return Heartbeat(job, "span", DONE, solved, solved, solved=solved, seconds=seconds)


def test_exact_multiples_have_no_error():
    found = pace.pace_of([(1.0, 3.0), (2.0, 6.0), (10.0, 30.0)], "here")
    assert found.ratio == pytest.approx(3.0)
    assert found.relative_error == pytest.approx(0.0, abs=1e-12)
    assert found.source == "here"


def test_one_pair_or_none_says_little():
    assert pace.pace_of([], "here") is None
    assert pace.pace_of([(0.0, 1.0), (1.0, -1.0)], "here") is None
    assert pace.pace_of([(2.0, 1.0)], "here") == pace.Pace(0.5, 1.0, "here")


def test_the_error_covers_the_ratio_of_a_sample():
    """Ratios scattered by 20 %: of 400 samples of 12, 95 % should cover the true ratio."""
    chance = np.random.default_rng(3)
    covered = 0
    for _ in range(400):
        actual = 2.0 * chance.lognormal(0.0, 0.2, 12) / math.exp(0.02)
        found = pace.pace_of([(1.0, float(a)) for a in actual], "")
        covered += abs(found.ratio / 2.0 - 1.0) <= found.relative_error
    # Binomial standard deviation 1.1 %; the part for what is not represented only widens.
    assert covered / 400 > 0.95 - 3 * 0.011


def test_finished_jobs_are_compared_with_their_share_of_the_prediction():
    jobs = {"a": planned(100.0, 50), "b": planned(30.0, 10)}
    # Half of job a and all of b, at twice the predicted time.
    found = pace.pace_of_jobs(jobs, [beat("a", 25, 100.0), beat("b", 10, 60.0), beat("x", 9, 1.0)])
    assert found is not None
    assert found[0].ratio == pytest.approx(2.0) and found[1] == 35
    # A few cases are not trusted yet.
    assert pace.pace_of_jobs(jobs, [beat("b", 2, 12.0)]) is None


@pytest.fixture
def fast(monkeypatch):
    """Solving takes no time of ours: a clock goes on as the cost model says, times 3."""
    clock = {"now": 0.0}

    def solve(task, digest, x, anchors, report):
        half = tuple(float(extent) for extent in task.shape.half_extents)
        clock["now"] += 3.0 * pace.effort.cost(half, task.index, x, cold=True)

    monkeypatch.setattr(attempts, "solve_case", solve)
    monkeypatch.setattr(pace.time, "perf_counter", lambda: clock["now"])
    monkeypatch.setattr(pace.time, "monotonic", lambda: clock["now"])
    return clock


def test_a_calibration_finds_the_ratio_and_is_remembered(fast, tmp_path):
    path = tmp_path / "cache" / "pace.json"
    assert pace.calibrated(path) is None
    found = pace.calibrate(path)
    assert found.ratio == pytest.approx(3.0)
    assert pace.calibrated(path) == found
    assert "6 cases" in found.source  # the first compiles and does not count


def test_a_slow_machine_stops_early(fast, tmp_path):
    found = pace.calibrate(tmp_path / "pace.json", seconds=0.0)
    assert "2 cases" in found.source
    assert found.ratio == pytest.approx(3.0)


def test_a_calibration_of_another_machine_or_model_is_not_used(fast, tmp_path):
    path = tmp_path / "pace.json"
    pace.calibrate(path)
    content = json.loads(path.read_text())
    path.write_text(json.dumps(content | {"machine": "another"}))
    assert pace.calibrated(path) is None
    for broken in ("", "[]", "{}", json.dumps(content | {"ratio": -1.0})):
        path.write_text(broken)
        assert pace.calibrated(path) is None


def test_where_it_cannot_be_kept_is_said(fast, tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(EnvironmentProblem, match="cannot be kept"):
        pace.calibrate(tmp_path / "file" / "pace.json")


def test_a_pace_is_plain():
    assert set(dataclasses.asdict(pace.UNKNOWN)) == {"ratio", "relative_error", "source"}
