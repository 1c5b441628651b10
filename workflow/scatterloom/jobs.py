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
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from threadpoolctl import threadpool_limits

from scatterloom.attempts import Task, solve_case
from scatterloom.errors import IntegrityError
from scatterloom.particle.shapes import from_spec
from scatterloom.scattering.case import Asked
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.casefile import read_records, write_records
from scatterloom.store.fields import FieldFile, read_fields, write_fields
from scatterloom.store.layout import Layout
from scatterloom.store.progress import DONE, RUNNING, Heartbeat, write_heartbeat

_HEARTBEAT_S = 0.5


class _Reporter:
    """Writes the heartbeat of a job, at most twice a second."""

    def __init__(self, folder: Path, task: Task, total: int) -> None:
        self._folder = folder
        self._beat = Heartbeat(task.name, task.kind, RUNNING, 0, total)
        self._last = 0.0
        self._write(force=True)

    def _write(self, force: bool = False, **changes: Any) -> None:
        self._beat = replace(self._beat, **changes)
        now = time.monotonic()
        if force or now - self._last > _HEARTBEAT_S:
            write_heartbeat(self._folder, self._beat)
            self._last = now

    def solving(self, size_parameter: float, residual: float) -> None:
        self._write(size_parameter=size_parameter, residual=residual)

    def finished_case(self, case: CaseRecord) -> None:
        self._write(
            force=True,
            cases_done=self._beat.cases_done + 1,
            size_parameter=case.size_parameter,
            residual=case.residual if np.isfinite(case.residual) else None,
            products=self._beat.products + case.products,
        )

    def done(self) -> None:
        self._write(force=True, state=DONE)


def solve(spec: Mapping[str, Any], folder: Path, threads: int = 1) -> None:
    """Solve all cases of a job and publish its case file (and, for anchors, its fields).

    Parameters
    ----------
    spec : mapping
        A job specification (`scatterloom.campaign.plan.Job.spec`).
    folder : Path
        Folder of the campaign.
    threads : int
        Threads for transforms and linear algebra.

    Raises
    ------
    IntegrityError
        If a fields file of another job that this one starts from is not as it was written.
    OSError
        From the file system.
    """
    with threadpool_limits(threads):
        _Job(spec, folder, threads).run()


class _Job:
    def __init__(self, spec: Mapping[str, Any], folder: Path, threads: int) -> None:
        self.spec = spec
        self.layout = Layout(folder)
        shape = from_spec(spec["shape"])
        cells = tuple(int(n) for n in spec["levels"])
        accuracy = spec["accuracy"]
        self.task = Task(
            name=spec["name"],
            kind=spec["kind"],
            shape=shape,
            shape_json=json.dumps(spec["shape"], sort_keys=True),
            index=complex(*spec["index"]),
            cells=cells,
            refinements=int(spec["refinements"]),
            tolerance=float(spec["tolerance"]),
            asked=Asked(
                accuracy["f11_relative"],
                accuracy["ratio_absolute"],
                accuracy["efficiency_relative"],
            ),
            threads=threads,
            inner_indices=tuple(complex(*m) for m in spec.get("inner_indices", ())),
        )
        self.cases: list[tuple[str, float]] = [(d, float(x)) for d, x in spec["cases"]]
        self.report = _Reporter(folder, self.task, len(self.cases))

    def run(self) -> None:
        keep_fields = self.task.kind == "anchors"
        anchors = self._anchor_fields()
        records = []
        fields: list[FieldFile] = []
        for digest, x in self.cases:
            kept = self._kept(digest)
            own = self._kept_fields(digest) if keep_fields else None
            if kept is None or (keep_fields and own is None):
                solved, levels = solve_case(self.task, digest, x, anchors, self.report.solving)
                if keep_fields:
                    own = FieldFile(digest, x, solved.products, [lv.fields for lv in levels])
                    write_fields(self.layout.solved_fields(digest), [own])
                if kept is None:
                    # A record published before stays as it is: only its fields were wanting.
                    kept = solved
                    write_records(self.layout.solved_case(digest), [kept])
            records.append(kept)
            if own is not None:
                fields.append(own)
            self.report.finished_case(kept)
        if keep_fields:
            write_fields(self.layout.field_file(self.task.name), fields)
        write_records(self.layout.case_file(self.task.name), records)
        for digest, _ in self.cases if keep_fields else ():
            self.layout.solved_fields(digest).unlink(missing_ok=True)
        self.report.done()

    def _kept(self, digest: str) -> CaseRecord | None:
        """Record of a case solved before, or None; an unreadable file is named and solved anew."""
        path = self.layout.solved_case(digest)
        if not path.exists():
            return None
        try:
            (kept,) = read_records(path)
        except (IntegrityError, ValueError) as error:
            print(f"{self.task.name}: {error}; the case is solved again", file=sys.stderr)
            return None
        return kept

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

    def _anchor_fields(self) -> list[FieldFile]:
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
        return sorted(found.values(), key=lambda entry: entry.size_parameter)
