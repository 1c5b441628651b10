"""Solver jobs made by hand."""

from __future__ import annotations

import json
from pathlib import Path

from scatterloom.campaign import effort
from scatterloom.campaign.case import Accuracy, Case, Overrides
from scatterloom.campaign.plan import Job
from scatterloom.particle.shapes import from_spec
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.casefile import read_records
from scatterloom.store.layout import Layout

ACCURACY = Accuracy(f11_relative=0.02, ratio_absolute=0.01, efficiency_relative=0.01)


def digest_of(shape, index: complex, size_parameter: float, levels) -> str:
    return Case(shape, index, size_parameter, ACCURACY, Overrides(levels=levels)).digest


def job(
    name: str,
    shape,
    index: complex,
    sizes,
    levels: tuple[int, ...],
    anchors: Job | tuple[Job, ...] = (),
    tolerance: float = 1e-4,
    refinements: int = 0,
) -> Job:
    """An anchors job, or a span job that starts from the cases of anchors jobs."""
    sources = (anchors,) if isinstance(anchors, Job) else anchors
    around = [(d, x, source.name) for source in sources for d, x in source.cases]
    return Job(
        name=name,
        kind="span" if sources else "anchors",
        shape=shape,
        index=complex(index),
        accuracy=ACCURACY,
        levels=tuple(levels),
        refinements=refinements,
        tolerance=tolerance,
        cases=tuple((digest_of(shape, complex(index), x, tuple(levels)), x) for x in sizes),
        needs=tuple(source.name for source in sources),
        anchors=tuple(sorted(around, key=lambda entry: entry[1])),
        seconds=1.0,
    )


def spec_of(one: Job) -> dict:
    """The specification as a job file would hold it."""
    return json.loads(json.dumps(one.spec()))


def default_job(name: str, shape, index: complex, sizes) -> Job:
    """Anchors at the default accuracy of a campaign; the largest size sets the lattices."""
    chosen = effort.levels(
        from_spec(shape).half_axes, complex(index), max(sizes), ACCURACY.f11_relative
    )
    tolerance = effort.operator_tolerance(ACCURACY.ratio_absolute)
    return job(name, shape, index, sizes, chosen, tolerance=tolerance)


def records_of(folder: Path, one: Job) -> list[CaseRecord]:
    return read_records(Layout(folder).case_file(one.name))
