"""Find damaged results before they are built on, and take failed cases up again."""

from __future__ import annotations

import os
from pathlib import Path

from scatterloom.attempts import failed_case
from scatterloom.errors import IntegrityError
from scatterloom.graph import Graph
from scatterloom.jobs import task_of
from scatterloom.store.casefile import check_file, write_records
from scatterloom.store.commit import COMMIT, verify_folder
from scatterloom.store.failures import read_failures, write_failure
from scatterloom.store.progress import read_heartbeat


def put_damaged_aside(graph: Graph, *, digests: bool) -> list[str]:
    """Put case files that are not as they were written aside, so that their jobs run again.

    The job takes every case that is whole from the state folder and solves only the rest.
    What is put aside is kept in the state folder.

    Parameters
    ----------
    graph : Graph
    digests : bool
        Whether to read every file whole, or only its first bytes and its length.

    Returns
    -------
    list of str
        One line a file, saying what is wrong.
    """
    lines = []
    for name in graph.jobs:
        path = graph.layout.case_file(name)
        if not path.exists():
            continue
        try:
            check_file(path, digest=digests)
        except IntegrityError as error:
            lines.append(str(error))
            aside = graph.layout.state / "damaged" / path.name
            aside.parent.mkdir(parents=True, exist_ok=True)
            os.replace(path, aside)
    if lines:
        _gather_again(graph)
    if digests:
        lines += _unpublish_damaged(graph)
    return lines


def _unpublish_damaged(graph: Graph) -> list[str]:
    """Make the engine write the table or bulk table again if any file of it is altered."""
    layout = graph.layout
    lines = []
    for folder, mark in (
        (layout.table, layout.receipt),
        (layout.bulk, layout.bulk / COMMIT),
    ):
        if not mark.exists():
            continue
        try:
            verify_folder(folder)
        except IntegrityError as error:
            lines += str(error).splitlines()
            mark.unlink()
    return lines


def take_up_failed(graph: Graph) -> int:
    """Forget the failed cases of a campaign, so that the next run solves them again.

    Returns
    -------
    int
        How many there were.
    """
    layout = graph.layout
    failed = {note.digest for note in read_failures(layout.failed)}
    if not failed:
        return 0
    taken = 0
    for name, job in graph.jobs.items():
        lost = [digest for digest, _ in job.cases if digest in failed]
        if not lost:
            continue
        taken += len(lost)
        # The job's file first: killed in between, the run finds the job unfinished.
        _gather_again(graph)
        layout.case_file(name).unlink(missing_ok=True)
        for digest in lost:
            for path in _files_of(graph, digest):
                path.unlink(missing_ok=True)
    return taken


def fail_case_at_work(graph: Graph, job: str, reason: str) -> bool:
    """Fail the case that a job was solving when a cluster killed it for exceeding a limit.

    Parameters
    ----------
    graph : Graph
    job : str
    reason : str
        "no_memory" or "no_time".

    Returns
    -------
    bool
        Whether the case is known, and was unfinished.
    """
    layout = graph.layout
    beat = read_heartbeat(layout.progress / f"{job}.json")
    sizes = dict(graph.jobs[job].cases) if job in graph.jobs else {}
    if beat is None or beat.case not in sizes or layout.solved_case(beat.case).exists():
        return False
    record = failed_case(task_of(graph.specs[job]), beat.case, sizes[beat.case], reason)
    write_records(layout.solved_case(beat.case), [record])
    write_failure(layout.failed / f"{beat.case}.json", record, job)
    (layout.checkpoints / f"{beat.case}.npz").unlink(missing_ok=True)
    return True


def _gather_again(graph: Graph) -> None:
    """Without the receipt the engine looks for every case file; with it, lost ones go unnoticed."""
    graph.layout.receipt.unlink(missing_ok=True)


def _files_of(graph: Graph, digest: str) -> tuple[Path, ...]:
    layout = graph.layout
    return (
        layout.solved_case(digest),
        layout.solved_fields(digest),
        layout.failed / f"{digest}.json",
    )
