"""`status`: what it tells of a campaign at work, once, as JSON and while it watches."""

from __future__ import annotations

import io
import json
import os
import pty
import sys

import pytest
from campaign_runs import config

from scatterloom.cli import main
from scatterloom.commands import status
from scatterloom.commands._display import Display
from scatterloom.graph import Graph
from scatterloom.store.progress import RUNNING, Heartbeat, Progress, write_heartbeat
from scatterloom.store.usage import disk_use

RECORD = bytes(8192)


@pytest.fixture
def work(tmp_path):
    """A campaign half done: one job published, one at work in this process."""
    path = config(tmp_path, 12)
    graph = Graph.open(path, tmp_path / "results")
    graph.prepare()
    first, second, *_ = graph.jobs
    graph.layout.cases.mkdir()
    graph.layout.case_file(first).write_bytes(RECORD)
    total = len(graph.jobs[second].cases)
    beat = Heartbeat(
        second, graph.jobs[second].kind, RUNNING, 1, total, 1.25, 3e-4, 2.5, solved=60, seconds=6.0
    )
    write_heartbeat(graph.layout.folder, beat)
    return path, tmp_path / "results", graph


def test_json_tells_everything(work, capsys):
    path, results, graph = work
    assert main(["status", str(path), "--results", str(results), "--json"]) == 0
    state = json.loads(capsys.readouterr().out)
    first, second, *_ = graph.jobs
    done = len(graph.jobs[first].cases) + 1
    assert (state["cases_done"], state["jobs_done"]) == (done, 1)
    assert state["cases_left"] == state["cases"] - done == state["particles"]["plate"]["left"]
    (running,) = state["running"]
    assert (running["job"], running["residual"], running["size_parameter"]) == (second, 3e-4, 1.25)
    # One job is at work, so the time left is the work left; its error comes with it.
    assert state["seconds_left"] == pytest.approx(state["core_seconds_left"])
    assert state["seconds_left_error"] == pytest.approx(state["core_seconds_left_error"])
    assert state["seconds_left_error"] > 0.0
    assert state["cases_a_core_hour"] == pytest.approx(36000.0)
    assert set(state["disk_bytes"]) == {"state", "fields", "cases", "table", "other", "library"}
    assert state["disk_bytes"]["cases"] >= len(RECORD)


def test_lines_tell_the_same(work, capsys):
    path, results, _ = work
    assert main(["status", str(path), "--results", str(results)]) == 0
    text = capsys.readouterr().out
    assert "residual 3.0e-04" in text and "size parameter 1.25" in text
    assert "with the jobs now at work (give or take" in text
    assert "disk used" in text and "cases 0.0" in text


def test_disk_use_tells_fields_from_records(work):
    _, _, graph = work
    layout = graph.layout
    before = disk_use(layout)
    for name in ("a.case", "a.npz"):
        target = layout.solved / "aa" / name
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_bytes(RECORD)
    (layout.folder / "audit.json").write_bytes(RECORD)
    layout.library.mkdir()
    (layout.library / "a.case").write_bytes(RECORD)
    after = disk_use(layout)
    grown = {name: after[name] - before[name] for name in after}
    assert all(grown[name] >= len(RECORD) for name in ("state", "fields", "other", "library"))
    assert grown["cases"] == grown["table"] == 0


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_watching_ends_when_nothing_is_left(work, monkeypatch):
    path, results, graph = work
    looks = []

    def a_job_ends(seconds: float) -> None:
        looks.append(seconds)
        todo = [n for n in graph.jobs if not graph.layout.case_file(n).exists()]
        graph.layout.case_file(todo[0]).write_bytes(RECORD)

    monkeypatch.setattr(status.time, "sleep", a_job_ends)
    screen = Terminal()
    monkeypatch.setattr(sys, "stdout", screen)
    assert main(["status", str(path), "--results", str(results), "--watch"]) == 0
    assert looks == [status.WATCH_EVERY_S] * (len(graph.jobs) - 1)
    pictures = screen.getvalue().split("\033[H\033[2J")[1:]
    assert len(pictures) == len(graph.jobs)
    assert f"jobs done       1 of {len(graph.jobs)}" in pictures[0]
    assert f"jobs done       {len(graph.jobs)} of {len(graph.jobs)}" in pictures[-1]


def test_watching_into_a_file_writes_no_controls(work, monkeypatch, capsys):
    path, results, graph = work

    def all_end(seconds: float) -> None:
        for name in graph.jobs:
            graph.layout.case_file(name).write_bytes(RECORD)

    monkeypatch.setattr(status.time, "sleep", all_end)
    assert main(["status", str(path), "--results", str(results), "--watch", "--json"]) == 0
    text = capsys.readouterr().out
    assert "\033" not in text
    decoder = json.JSONDecoder()
    first, end = decoder.raw_decode(text)
    second, _ = decoder.raw_decode(text[end:].lstrip())
    assert first["cases_left"] > 0 and second["cases_left"] == 0


def test_a_run_draws_its_panel_on_a_real_terminal(monkeypatch):
    monkeypatch.setenv("TERM", "xterm")
    beat = Heartbeat("b", "span", RUNNING, 2, 8, 2.75, 3e-4, updated=2.0)
    master, slave = pty.openpty()
    with os.fdopen(slave, "w") as stream, Display("campaign tiny", stream) as display:
        display.show(Progress(12, 6, 3, 1, (beat,), (), 41.6), "filling in", 61.0)
        text = os.read(master, 1 << 16).decode()
        while "1 min 01 s" not in text:
            text += os.read(master, 1 << 16).decode()
    os.close(master)
    assert "6 of 12" in text and "residual 3.0e-04" in text
    assert "\x1b[" in text
