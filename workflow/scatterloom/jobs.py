"""The solver job: solves the cases of one job file and publishes their records.

An anchors job solves each of its sizes from nothing and publishes the fields; a span job
starts each of its sizes from the fields of the anchors around it. Every finished case is
kept at once in the campaign's state folder, so that an interrupted job goes on where it
stopped; starts come from anchors only, so the order of work does not change any result.
"""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Callable, Mapping
from dataclasses import replace
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from threadpoolctl import threadpool_limits

from scatterloom.attempts import Task, failed_case, forget_checkpoint, solve_case
from scatterloom.errors import IntegrityError
from scatterloom.limits import Limits, TimeGrantedIsUp, peak_bytes
from scatterloom.particle.shapes import from_spec
from scatterloom.scattering.case import Asked
from scatterloom.scattering.record import FAILED, CaseRecord
from scatterloom.solids.kept import look_in
from scatterloom.store.casefile import read_records, write_records
from scatterloom.store.failures import write_failure
from scatterloom.store.fields import FieldFile, read_fields, write_fields
from scatterloom.store.layout import Layout
from scatterloom.store.library import CaseLibrary
from scatterloom.store.progress import DONE, RUNNING, Heartbeat, write_heartbeat
from scatterloom.store.transitions import (
    StoredTransitions,
    read_transitions,
    write_transitions,
)
from scatterloom.transition.level import LevelResult

HEARTBEAT_S = 0.5

_SAVED_BY_START = 0.6
"""Share of a cold solve that a start from neighbours saves (`campaign.effort.cost`)."""

KEPT, REUSED, SOLVED_NOW = "kept", "reused", "solved"
"""Where a record came from: this campaign before, the case library, this job."""


class _Reporter:
    """Writes the heartbeat of a job, now and then, while it is the job's turn."""

    def __init__(
        self, folder: Path, task: Task, total: int, every_s: float, check: Callable[[], None]
    ) -> None:
        self._folder = folder
        self._every_s = every_s
        self.check = check
        self._beat = Heartbeat(task.name, task.kind, RUNNING, 0, total)
        self._last = 0.0
        self._write(force=True)

    def _write(self, force: bool = False, **changes: Any) -> None:
        self._beat = replace(self._beat, **changes)
        now = time.monotonic()
        if force or now - self._last > self._every_s:
            self.check()
            write_heartbeat(self._folder, self._beat)
            self._last = now

    def begins(self, digest: str, size_parameter: float) -> None:
        self._write(force=self._every_s > HEARTBEAT_S, case=digest, size_parameter=size_parameter)

    def solving(self, size_parameter: float, residual: float) -> None:
        self._write(size_parameter=size_parameter, residual=residual)

    def finished_case(self, case: CaseRecord, how: str) -> None:
        beat = self._beat
        new = how == SOLVED_NOW
        self._write(
            force=True,
            cases_done=beat.cases_done + 1,
            size_parameter=case.size_parameter,
            residual=case.residual if np.isfinite(case.residual) else None,
            products=beat.products + case.products,
            solved=beat.solved + new,
            seconds=beat.seconds + (case.wall_seconds if new else 0.0),
            reused=beat.reused + (how == REUSED),
            cases_failed=beat.cases_failed + (case.status == FAILED),
            peak_bytes=max(beat.peak_bytes, peak_bytes()),
        )

    def done(self) -> None:
        self._write(force=True, state=DONE)


def solve(
    spec: Mapping[str, Any],
    folder: Path,
    threads: int = 1,
    limits: Limits | None = None,
    library: CaseLibrary | None = None,
    *,
    every_s: float = HEARTBEAT_S,
    check: Callable[[], None] = lambda: None,
    last_attempt: bool = False,
) -> None:
    """Solve all cases of a job and publish its case file (and, for anchors, its fields).

    Parameters
    ----------
    spec : mapping
        A job specification (`scatterloom.campaign.plan.Job.spec`).
    folder : Path
        Folder of the campaign.
    threads : int
        Threads for transforms and linear algebra.
    limits : Limits, optional
        What a case may take; no bounds if missing.
    library : CaseLibrary, optional
        Solved cases of other campaigns; none are reused if missing.
    every_s : float
        Least time between two heartbeats [s].
    check : callable
        Called before anything is written; raises CampaignHeld if it is no longer this job's
        turn.
    last_attempt : bool
        Whether a cluster will not try this job again: a case that took all of the time
        granted then fails.

    Raises
    ------
    CampaignHeld
        From `check`.
    TimeGrantedIsUp
        If the cluster is about to end the job.
    IntegrityError
        If a fields file of another job that this one starts from is not as it was written.
    OSError
        From the file system.
    """
    look_in(Layout(folder).solids)
    with threadpool_limits(threads):
        state = Layout(folder).checkpoints
        task = task_of(spec, threads, limits or Limits(), state)
        report = _Reporter(folder, task, len(spec["cases"]), every_s, check)
        _Job(spec, folder, task, report, library).run(last_attempt)


def task_of(
    spec: Mapping[str, Any],
    threads: int = 1,
    limits: Limits | None = None,
    state: Path | None = None,
) -> Task:
    """Return what all cases of a job share, from its specification."""
    accuracy = spec["accuracy"]
    return Task(
        name=spec["name"],
        kind=spec["kind"],
        shape=from_spec(spec["shape"]),
        shape_json=json.dumps(spec["shape"], sort_keys=True),
        index=complex(*spec["index"]),
        cells=tuple(int(n) for n in spec["levels"]),
        refinements=int(spec["refinements"]),
        tolerance=float(spec["tolerance"]),
        asked=Asked(
            accuracy["f11_relative"],
            accuracy["ratio_absolute"],
            accuracy["efficiency_relative"],
        ),
        threads=threads,
        limits=limits or Limits(),
        state=state,
        inner_indices=tuple(complex(*m) for m in spec.get("inner_indices", ())),
    )


class _Job:
    def __init__(
        self,
        spec: Mapping[str, Any],
        folder: Path,
        task: Task,
        report: _Reporter,
        library: CaseLibrary | None,
    ) -> None:
        self.spec = spec
        self.library = library
        self.layout = Layout(folder)
        self.task = task
        self.report = report
        self.cases: list[tuple[str, float]] = [(d, float(x)) for d, x in spec["cases"]]
        self._solved_some = False
        self.keep_transitions = bool(spec.get("keep_transitions"))

    def run(self, last_attempt: bool) -> None:
        keep_fields = self.task.kind == "anchors"
        records = []
        fields: list[FieldFile] = []
        for digest, x in self.cases:
            kept, how = self._kept(digest), KEPT
            if kept is None and (kept := self._reused(digest, x)) is not None:
                how = REUSED
            own = self._kept_fields(digest) if keep_fields else None
            if kept is None or (keep_fields and own is None and self._fields_pay):
                solved, levels = self._solve(digest, x, last_attempt)
                if keep_fields:
                    own = FieldFile(digest, x, solved.products, [lv.fields for lv in levels])
                    write_fields(self.layout.solved_fields(digest), [own])
                if kept is None:
                    # A record published before stays as it is: only its fields were wanting.
                    kept, how = solved, SOLVED_NOW
                    self._keep(kept)
                forget_checkpoint(self.task, digest)
            records.append(kept)
            if keep_fields:
                # An entry without levels says that nobody needs the fields of this anchor.
                fields.append(own or FieldFile(digest, x, kept.products, []))
            self.report.finished_case(kept, how)
        self.report.check()
        if keep_fields:
            write_fields(self.layout.field_file(self.task.name), self._within_budget(fields))
        write_records(self.layout.case_file(self.task.name), records)
        for digest, _ in self.cases if keep_fields else ():
            self.layout.solved_fields(digest).unlink(missing_ok=True)
        self.report.done()

    def _solve(
        self, digest: str, x: float, last_attempt: bool
    ) -> tuple[CaseRecord, list[LevelResult]]:
        anchors = [] if self.task.kind == "anchors" else self._anchors
        self.report.begins(digest, x)
        try:
            found = solve_case(self.task, digest, x, anchors, self.report.solving)
        except TimeGrantedIsUp:
            if last_attempt and not self._solved_some:
                # All of the longest time that is granted was not enough for this one.
                self._keep(failed_case(self.task, digest, x, "no_time"))
                forget_checkpoint(self.task, digest)
            raise
        self._solved_some = True
        return found

    def _within_budget(self, fields: list[FieldFile]) -> list[FieldFile]:
        """The fields to pass on; entries without levels where the disk allowed is used up.

        Rows are kept in two bytes a number; other jobs' files are those that wait for spans.
        """
        held = sum(
            path.stat().st_size
            for path in self.layout.fields.glob("*.npz")
            if path != self.layout.field_file(self.task.name)
        )
        out, dropped = [], 0
        for entry in fields:
            size = sum(rows.nbytes // 2 for level in entry.levels for rows in level.rows)
            if held + size > self.task.limits.fields_bytes:
                entry, dropped = replace(entry, levels=[]), dropped + bool(entry.levels)
            else:
                held += size
            out.append(entry)
        if dropped:
            print(
                f"{self.task.name}: fields of {dropped} anchors are not passed on: "
                "solver.fields_gib is used up",
                file=sys.stderr,
            )
        return out

    def _keep(self, case: CaseRecord) -> None:
        """Keep a case just solved, for this campaign and for others."""
        self.report.check()
        path = self.layout.solved_case(case.digest)
        if self.keep_transitions and case.transitions is not None and case.status != FAILED:
            # First, so that a case that is there has its matrices.
            stored = StoredTransitions(
                case.digest, self.task.shape.symmetry, case.levels, case.transitions
            )
            write_transitions(self.layout.solved_transitions(case.digest), stored)
        write_records(path, [case])
        note = self.layout.failed / f"{case.digest}.json"
        if case.status == FAILED:
            write_failure(note, case, self.task.name)
        else:
            note.unlink(missing_ok=True)
            if self.library is not None:
                self.library.add(self.spec, case, path)

    def _kept(self, digest: str) -> CaseRecord | None:
        """Record of a case solved before, or None; an unreadable file is named and solved anew."""
        path = self.layout.solved_case(digest)
        if not path.exists():
            return None
        try:
            (kept,) = read_records(path)
            if kept.digest != digest:
                raise IntegrityError(f"{path}: holds case {kept.digest}, not its own")
            if self.keep_transitions and kept.status != FAILED:
                read_transitions(self.layout.solved_transitions(digest))
        except (IntegrityError, ValueError) as error:
            print(f"{self.task.name}: {error}; the case is solved again", file=sys.stderr)
            return None
        return kept

    def _reused(self, digest: str, x: float) -> CaseRecord | None:
        """Record from the case library, kept in this campaign as well, or None."""
        if self.library is None or self.keep_transitions:
            # The library has no transition matrices.
            return None
        found = self.library.find(self.spec, x, digest)
        if found is not None:
            write_records(self.layout.solved_case(digest), [found])
        return found

    @cached_property
    def _fields_pay(self) -> bool:
        """Whether to solve finished anchors again for their fields' sake.

        A start saves a size `_SAVED_BY_START` of a cold solve, so a few sizes that are new
        between many finished anchors are cheaper solved from nothing.
        """
        specs = [json.loads(path.read_bytes()) for path in self.layout.jobs.glob("span-*.json")]
        if not specs:
            return True  # a job run by hand: nothing is known of those that depend on it
        lacking = sum(self._kept_fields(digest) is None for digest, _ in self.cases)
        wanting = sum(
            not self.layout.solved_case(digest).exists()
            and (self.library is None or self.library.find(spec, float(x), digest) is None)
            for spec in specs
            if self.task.name in spec["needs"]
            for digest, x in spec["cases"]
        )
        return _SAVED_BY_START * wanting > lacking

    def _kept_fields(self, digest: str) -> FieldFile | None:
        """Fields of an anchor solved before this job was interrupted, or None."""
        for path in (
            self.layout.solved_fields(digest),
            self.layout.field_file(self.task.name),
        ):
            if not path.exists():
                continue
            try:
                for entry in read_fields(path):
                    if entry.digest == digest:
                        return entry
            except IntegrityError as error:
                print(f"{self.task.name}: {error}; the case is solved again", file=sys.stderr)
        return None

    @cached_property
    def _anchors(self) -> list[FieldFile]:
        """Anchors with fields to start from, read when the first size needs them."""
        wanted = {digest for digest, _, _ in self.spec["anchors"]}
        found = {
            entry.digest: entry
            for name in self.spec["needs"]
            for entry in read_fields(self.layout.field_file(name))
            if entry.digest in wanted
        }
        missing = wanted - found.keys()
        if missing:
            raise IntegrityError(
                f"fields of {len(missing)} anchors are missing from {self.layout.fields}; "
                "delete the fields files named in the job file and run again"
            )
        with_fields = [entry for entry in found.values() if entry.levels]
        return sorted(with_fields, key=lambda entry: entry.size_parameter)
