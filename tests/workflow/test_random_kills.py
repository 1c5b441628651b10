"""Random kill -9: nothing finished is lost or solved twice, and the table is the same."""

import sys

import pytest
from kill_loop import kill_loop

pytestmark = pytest.mark.skipif(not sys.platform.startswith("linux"), reason="looks into /proc")


def test_a_few_random_kills(tmp_path, monkeypatch):
    # `scripts/faults` does the same with as many kills as wanted.
    monkeypatch.setenv("SCATTERLOOM_CASE_REUSE", "off")
    counts = kill_loop(tmp_path, kills=2, seed=7, count=16, say=lambda text: None)
    assert sum(counts[name] for name in ("everything", "worker", "engine", "front")) == 2
    assert counts["finished"] >= 1
