"""Progress counts every case once, and tells work from the remains of dead jobs."""

from __future__ import annotations

import json

import pytest

from scatterloom.store.layout import Layout
from scatterloom.store.progress import (
    DONE,
    RUNNING,
    WAITING,
    Heartbeat,
    Meter,
    fail_heartbeat,
    read_heartbeat,
    write_heartbeat,
)

JOBS = {"a": 4, "b": 6, "c": 10}
SECONDS = {"a": 4.0, "b": 6.0, "c": 90.0}


@pytest.fixture
def layout(tmp_path):
    return Layout(tmp_path)


def publish(layout: Layout, job: str) -> None:
    layout.cases.mkdir(exist_ok=True)
    layout.case_file(job).touch()


def test_nothing_yet(layout):
    meter = Meter(layout, JOBS)
    progress = meter.measure()
    assert (progress.cases, progress.cases_done, progress.jobs_done) == (20, 0, 0)
    assert meter.share_done(SECONDS) == 0.0


def test_finished_running_and_failed_jobs_are_told_apart(layout):
    meter = Meter(layout, JOBS)
    write_heartbeat(layout.folder, Heartbeat("a", "anchors", DONE, 4, 4, products=12.0))
    publish(layout, "a")
    write_heartbeat(layout.folder, Heartbeat("b", "anchors", RUNNING, 3, 6, 1.5, 1e-3, 5.0))
    write_heartbeat(layout.folder, Heartbeat("c", "span", RUNNING, 1, 10))
    fail_heartbeat(layout.folder, "c", "span", 10, 3, "the disk is full")
    progress = meter.measure()
    assert progress.cases_done == 4 + 3 + 1
    assert progress.jobs_done == 1
    assert [job.job for job in progress.running] == ["b"]
    (failed,) = progress.failed
    assert (failed.exit_code, failed.message, failed.cases_done) == (3, "the disk is full", 1)
    assert progress.products == 17.0
    # Weighed by predicted time: 4 + 3 + 9 of 100 seconds.
    assert meter.share_done(SECONDS) == pytest.approx(0.16)
    # A finished job stays counted without its heartbeat.
    (layout.progress / "a.json").unlink()
    assert meter.measure() == progress
    assert json.loads(json.dumps(progress.as_dict()))["cases_left"] == 12


def test_a_job_whose_files_were_deleted_counts_no_more(layout):
    meter = Meter(layout, JOBS)
    publish(layout, "a")
    assert meter.measure().jobs_done == 1
    layout.case_file("a").unlink()
    assert meter.measure().jobs_done == 0
    assert meter.measure().cases_done == 0


def test_a_dead_job_is_not_running_and_keeps_its_cases(layout):
    write_heartbeat(layout.folder, Heartbeat("b", "anchors", RUNNING, 3, 6))
    path = layout.progress / "b.json"
    # No process has this number: it is above the largest that Linux gives.
    path.write_text(json.dumps(json.loads(path.read_text()) | {"pid": 2**22 + 1}))
    progress = Meter(layout, JOBS).measure()
    assert progress.running == ()
    assert progress.failed == ()
    assert progress.cases_done == 3


def test_a_job_of_another_host_is_believed_for_a_while(layout):
    write_heartbeat(layout.folder, Heartbeat("b", "anchors", RUNNING, 3, 6))
    path = layout.progress / "b.json"
    there = json.loads(path.read_text()) | {"host": "elsewhere", "pid": 2**22 + 1}
    path.write_text(json.dumps(there))
    assert len(Meter(layout, JOBS).measure().running) == 1
    path.write_text(json.dumps(there | {"updated": there["updated"] - 3600}))
    assert Meter(layout, JOBS).measure().running == ()


def test_old_failures_are_forgotten_before_another_try(layout):
    fail_heartbeat(layout.folder, "a", "anchors", 4, 70, "a fault")
    meter = Meter(layout, JOBS)
    assert len(meter.measure().failed) == 1
    meter.forget_failures()
    assert meter.measure().failed == ()
    assert read_heartbeat(layout.progress / "a.json").state == WAITING


@pytest.mark.parametrize("text", ["", "{", "[]", "{}", '{"job": 1}'])
def test_an_unreadable_heartbeat_is_none(layout, text):
    layout.progress.mkdir(parents=True)
    path = layout.progress / "a.json"
    path.write_text(text)
    assert read_heartbeat(path) is None
    assert Meter(layout, JOBS).measure().cases_done == 0


def test_an_empty_campaign_is_done(layout):
    assert Meter(layout, {}).share_done({}) == 1.0
