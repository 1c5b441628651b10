"""Lay out the jobs of a campaign: ladders, segments, anchors and spans.

A ladder holds all sizes of one (shape, indices), of all wavelengths. A segment is a run of
sizes solved on the same lattices. In each segment anchors are solved from nothing; the
sizes between two anchors form a span and are filled in from both sides.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from itertools import pairwise
from typing import Any, TypeVar

from scatterloom.campaign import effort
from scatterloom.campaign.case import Accuracy, Case, canonical_json, indices_content
from scatterloom.campaign.expand import Grid
from scatterloom.campaign.geometry import Extents, extents
from scatterloom.errors import BadInput

MOST_JOBS = 10_000
"""The workflow engine takes 9 s for a graph of this many jobs, and linearly more beyond."""

SHORTEST_JOB_S = 20.0
SHARES = 200
"""Jobs are no longer than one of so many parts of the whole campaign, solved cold."""

ANCHORS_EACH_SIDE = 2

T = TypeVar("T")


@dataclass(frozen=True)
class Job:
    """One solver job.

    Attributes
    ----------
    name : str
        Kind, shape and a digest of everything else; a changed job has another name.
    kind : str
        "anchors" (each case solved from nothing) or "span" (filled in between anchors).
    shape, index, inner_indices, accuracy, levels, refinements, tolerance
        What all cases of the job share; `levels` are cells across, coarse to fine, and
        `refinements` is how often finer ones may follow (never where levels are given).
    cases : tuple of (digest, size parameter)
        The sizes this job solves, ascending.
    needs : tuple of str
        Names of the anchors jobs whose fields are read.
    anchors : tuple of (digest, size parameter, job name)
        Up to two anchors on either side of each span of the job, ascending.
    seconds : float
        Predicted time on one core; no part of the name or the specification.
    keep_transitions : bool
        Whether transition matrices are kept for averages over other orientations.
    """

    name: str
    kind: str
    shape: Mapping[str, Any]
    index: complex
    accuracy: Accuracy
    levels: tuple[int, ...]
    refinements: int
    tolerance: float
    cases: tuple[tuple[str, float], ...]
    needs: tuple[str, ...]
    anchors: tuple[tuple[str, float, str], ...]
    seconds: float
    inner_indices: tuple[complex, ...] = ()
    keep_transitions: bool = False

    def spec(self) -> dict[str, Any]:
        """Return everything a solver job needs, as values that JSON can hold."""
        return {"name": self.name, **_content(self)}


@dataclass(frozen=True)
class _Size:
    """One size of a ladder with its predicted cost [s], cold and filled in."""

    digest: str
    x: float
    cold: float
    warm: float


@dataclass(frozen=True)
class _Segment:
    """A run of sizes on the same lattices; `anchors` are positions in `sizes`."""

    case: Case  # any case of the ladder, for what they share
    levels: tuple[int, ...]
    sizes: tuple[_Size, ...]
    anchors: tuple[int, ...]


def plan(grid: Grid) -> list[Job]:
    """Return the jobs that solve every case of the grid once, anchors before their spans.

    Cases are batched to jobs of at most about `grid.job_seconds`; to shorter ones in a small
    campaign, so that it can use many cores; to longer ones if there would be more than
    `MOST_JOBS` otherwise.

    Raises
    ------
    BadInput
        If even the longest jobs are too many.
    """
    segments = [segment for ladder in _ladders(grid) for segment in _segments(ladder, grid)]
    longest = math.fsum(size.cold for segment in segments for size in segment.sizes)
    # A small campaign is shared out too, down to jobs whose start-up still does not matter.
    # In powers of two, so that a few more sizes or particles seldom lay out all jobs anew.
    doublings = max(0, math.ceil(math.log2(max(longest, 1.0) / SHARES / SHORTEST_JOB_S)))
    seconds = min(grid.job_seconds, SHORTEST_JOB_S * 2.0**doublings)
    while _count(segments, seconds) > MOST_JOBS:
        if seconds > longest:
            raise BadInput(
                f"campaign '{grid.campaign}' needs {_count(segments, seconds)} jobs, more than "
                f"{MOST_JOBS}\n  hint: split it into several campaigns with fewer particles "
                "or wavelengths"
            )
        seconds *= 1.5
    return [job for segment in segments for job in _jobs(segment, seconds, grid.keep_transitions)]


def _ladders(grid: Grid) -> list[list[Case]]:
    """Return the cases of each (shape, indices), ascending in size."""
    ladders: dict[tuple[str, tuple[complex, ...]], list[Case]] = {}
    keys: dict[int, str] = {}  # cases of one particle share their shape object
    for case in grid.cases:
        shape = keys.setdefault(id(case.shape), canonical_json(dict(case.shape)))
        ladders.setdefault((shape, case.indices), []).append(case)
    return [sorted(cases, key=lambda case: case.size_parameter) for cases in ladders.values()]


def _segments(ladder: Sequence[Case], grid: Grid) -> Iterator[_Segment]:
    reach = extents(ladder[0].shape)
    run: list[_Size] = []
    current: tuple[int, ...] = ()
    for case in ladder:
        levels, size = _predict(case, reach)
        if run and levels != current:
            yield _segment(ladder[0], current, run, grid)
            run = []
        current = levels
        run.append(size)
    yield _segment(ladder[0], current, run, grid)


def _predict(case: Case, reach: Extents) -> tuple[tuple[int, ...], _Size]:
    x, axes = case.size_parameter, reach.half
    index = max(case.indices, key=abs)  # the shortest wavelength inside sets the cells
    chosen = effort.levels(reach.lengths, index, x, case.accuracy.f11_relative)
    levels = case.overrides.levels or chosen
    # The prediction is for the chosen levels; cost is proportional to the number of cells.
    scale = sum(n**3 for n in levels) / sum(n**3 for n in chosen)
    # The cost counts waves for the half extents; corners reach farther.
    scale *= (effort.n_max(reach.radii, x) / effort.n_max(axes, x)) ** 2
    cold = scale * effort.cost(axes, index, x, cold=True)
    warm = scale * effort.cost(axes, index, x, cold=False)
    return levels, _Size(case.digest, x, cold, warm)


def _segment(case: Case, levels: tuple[int, ...], run: list[_Size], grid: Grid) -> _Segment:
    def step(x: float) -> float:
        strongest = max(case.indices, key=lambda index: abs(index - 1.0))
        return grid.anchor_spacing or effort.anchor_step(strongest, x)

    anchors = choose_anchors([size.x for size in run], step)
    return _Segment(case, levels, tuple(run), tuple(anchors))


def choose_anchors(sizes: Sequence[float], step: Callable[[float], float]) -> list[int]:
    """Choose anchors among ascending sizes: first, last, and gaps of at most `step(x)`.

    Each anchor is the farthest size within the gap allowed at its own size; where not even
    the next size is near enough, that one is the anchor. Counting starts at the smallest
    size, so larger sizes added later leave all anchors but the last as they were.
    """
    if len(sizes) <= 2:
        return list(range(len(sizes)))
    anchors = [0]
    last = len(sizes) - 1
    while anchors[-1] < last:
        here = anchors[-1]
        there = here + 1
        while there < last and sizes[there + 1] - sizes[here] <= step(sizes[there + 1]):
            there += 1
        anchors.append(there)
    return anchors


def _anchor_batches(segment: _Segment, seconds: float) -> list[list[_Size]]:
    anchors = [segment.sizes[position] for position in segment.anchors]
    return _batches(anchors, [size.cold for size in anchors], seconds)


def _span_batches(segment: _Segment, seconds: float) -> list[list[tuple[int, list[_Size]]]]:
    """Return batches of (number of the span in its segment, some of its sizes)."""
    pieces: list[tuple[int, list[_Size]]] = []
    costs: list[float] = []
    for number, (low, high) in enumerate(pairwise(segment.anchors)):
        inner = segment.sizes[low + 1 : high]
        for piece in _batches(inner, [size.warm for size in inner], seconds):
            pieces.append((number, piece))
            costs.append(math.fsum(size.warm for size in piece))
    return _batches(pieces, costs, seconds)


def _batches(items: Sequence[T], costs: Sequence[float], seconds: float) -> list[list[T]]:
    """Cut a sequence into runs that cost at most `seconds`, or hold a single item."""
    batches: list[list[T]] = []
    spent = math.inf
    for item, cost in zip(items, costs, strict=True):
        if spent + cost > seconds:
            batches.append([])
            spent = 0.0
        batches[-1].append(item)
        spent += cost
    return batches


def _count(segments: Sequence[_Segment], seconds: float) -> int:
    return sum(
        len(_anchor_batches(segment, seconds)) + len(_span_batches(segment, seconds))
        for segment in segments
    )


def _jobs(segment: _Segment, seconds: float, keep: bool) -> Iterator[Job]:
    placed: list[tuple[str, float, str]] = []  # every anchor with the job that solves it
    for batch in _anchor_batches(segment, seconds):
        cost = math.fsum(size.cold for size in batch)
        job = _job("anchors", segment, batch, (), cost, keep)
        placed += [(size.digest, size.x, job.name) for size in batch]
        yield job
    for pieces in _span_batches(segment, seconds):
        first, last = pieces[0][0], pieces[-1][0]
        # At the end of a segment the other side makes up for the anchors that are not there.
        spare = len(placed) - 2 * ANCHORS_EACH_SIDE
        low = max(0, min(first + 1 - ANCHORS_EACH_SIDE, spare))
        high = max(last + 1 + ANCHORS_EACH_SIDE, 2 * ANCHORS_EACH_SIDE)
        around = tuple(placed[low:high])
        sizes = [size for _, piece in pieces for size in piece]
        cost = math.fsum(size.warm for size in sizes)
        yield _job("span", segment, sizes, around, cost, keep)


def _job(
    kind: str,
    segment: _Segment,
    sizes: Sequence[_Size],
    anchors: tuple[tuple[str, float, str], ...],
    seconds: float,
    keep_transitions: bool,
) -> Job:
    case = segment.case
    tolerance = case.overrides.tolerance
    if tolerance is None:
        tolerance = effort.operator_tolerance(case.accuracy.ratio_absolute)
    job = Job(
        name="",
        kind=kind,
        shape=case.shape,
        index=case.index,
        accuracy=case.accuracy,
        levels=segment.levels,
        refinements=0 if case.overrides.levels else effort.MOST_REFINEMENTS,
        tolerance=tolerance,
        cases=tuple((size.digest, size.x) for size in sizes),
        needs=tuple(dict.fromkeys(name for _, _, name in anchors)),
        anchors=anchors,
        seconds=seconds,
        inner_indices=case.inner_indices,
        keep_transitions=keep_transitions,
    )
    digest = hashlib.sha256(canonical_json(_content(job)).encode()).hexdigest()[:16]
    name = f"{kind}-{case.shape['kind']}-{digest}"
    return Job(**{**job.__dict__, "name": name})


def _content(job: Job) -> dict[str, Any]:
    return {
        "kind": job.kind,
        "shape": dict(job.shape),
        **indices_content(job.index, job.inner_indices),
        "accuracy": asdict(job.accuracy),
        "levels": list(job.levels),
        "refinements": job.refinements,
        "tolerance": job.tolerance,
        "cases": [list(entry) for entry in job.cases],
        "needs": list(job.needs),
        "anchors": [list(entry) for entry in job.anchors],
        "numerics_revision": effort.NUMERICS_REVISION,
        # Left out where it is not: names of jobs stay as they were.
        **({"keep_transitions": True} if job.keep_transitions else {}),
    }
