"""The progress display says the same on a terminal and in a file, and estimates honestly."""

from __future__ import annotations

import io

import pytest

from scatterloom.commands._display import Display, TimeLeft, line, spoken
from scatterloom.store.progress import RUNNING, Heartbeat, Progress

EARLIER = Heartbeat("a", "anchors", RUNNING, 1, 4, 0.5, 2e-2, updated=1.0)
LATER = Heartbeat("b", "span", RUNNING, 2, 8, 2.75, 3e-4, updated=2.0)
HALF = Progress(12, 6, 3, 1, (EARLIER, LATER), (), 41.6)
ALL = Progress(12, 12, 3, 3, (), (), 80.0)


def test_one_line_says_everything():
    assert line(HALF, "filling in", 61.0) == (
        "filling in, 6 of 12 cases, size parameter 2.75, residual 3.0e-04, "
        "42 products per wave in all, time left 1 min 01 s"
    )
    assert line(ALL, "drawing", None) == "drawing, 12 of 12 cases, 80 products per wave in all"


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (None, "not known yet"),
        (0.4, "0 s"),
        (59.6, "1 min 00 s"),
        (3599, "59 min 59 s"),
        (3600, "1 h 00 min"),
        (90061, "25 h 01 min"),
    ],
)
def test_durations(seconds, text):
    assert spoken(seconds) == text


def test_time_left_follows_the_work_done_in_this_run_alone():
    clock = TimeLeft()
    # Half the work was done by an earlier run and says nothing of the speed.
    assert clock.update(0.5, 100.0) is None
    assert clock.update(0.5, 110.0) is None
    assert clock.update(0.6, 120.0) == pytest.approx(80.0)
    assert clock.update(1.0, 200.0) == pytest.approx(0.0)


def test_plain_lines_come_only_when_something_changed():
    stream = io.StringIO()
    with Display("campaign tiny", stream) as display:
        display.show(HALF, "filling in", None)
        display.show(HALF, "filling in", None)
        display.show(ALL, "drawing", None)  # too soon after the first
    (only,) = stream.getvalue().splitlines()
    assert only.startswith("campaign tiny: filling in, 6 of 12 cases")
    assert "\x1b" not in stream.getvalue()


def test_a_terminal_gets_a_panel_without_colour_if_asked(monkeypatch):
    monkeypatch.setenv("NO_COLOR", "1")
    monkeypatch.setenv("TERM", "xterm")
    stream = io.StringIO()
    with Display("campaign tiny", stream, live=True) as display:
        display.show(HALF, "filling in", 61.0)
    text = stream.getvalue()
    for words in ("campaign tiny", "6 of 12", "1 min 01 s", "size parameter 2.75"):
        assert words in text
    assert "\x1b[3" not in text.replace("\x1b[3m", "")  # colours are 30 to 37
