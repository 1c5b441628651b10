"""What a case may take: memory foreseen, time watched, iterates kept; failures numbered."""

import json
from dataclasses import replace

import numpy as np
import pytest

from job_kit import job, records_of, spec_of
from lattice_kit import SPHERE
from oracles import mie
from scatterloom import attempts, jobs
from scatterloom.campaign import memory
from scatterloom.limits import Limits
from scatterloom.scattering import record
from scatterloom.scattering.reasons import REASONS, reason_of
from scatterloom.store.failures import read_failures
from scatterloom.store.fields import read_fields
from scatterloom.store.layout import Layout
from scatterloom.store.progress import read_heartbeat

INDEX = 1.5 + 0.01j
LEVELS = (8, 10, 12)
SIZES = (1.0, 1.6)


def flagged(case, name):
    return bool(case.warning_flags & record.FLAGS[name][0])


def test_a_case_beyond_the_memory_never_starts(tmp_path, monkeypatch):
    monkeypatch.setattr(attempts, "solve_level", lambda *a, **k: pytest.fail("was started"))
    one = job("anchors-big", SPHERE, INDEX, SIZES, LEVELS)
    jobs.solve(spec_of(one), tmp_path, limits=Limits(memory_bytes=memory.PROGRAM_BYTES))
    for case in records_of(tmp_path, one):
        assert case.status == record.FAILED
        assert flagged(case, "no_memory")
        assert reason_of(case.warning_flags).number == 2
    notes = read_failures(Layout(tmp_path).failed)
    assert [(note.number, note.size_parameter) for note in notes] == [(2, 1.0), (2, 1.6)]
    assert "solver.memory_gib" in notes[0].advice
    beat = read_heartbeat(Layout(tmp_path).progress / "anchors-big.json")
    assert beat is not None and (beat.cases_failed, beat.cases_done) == (2, 2)


def test_a_failed_anchor_leaves_its_span_to_cold_starts(tmp_path):
    anchors = job("anchors-big", SPHERE, INDEX, SIZES, LEVELS)
    jobs.solve(spec_of(anchors), tmp_path, limits=Limits(memory_bytes=1.0))
    span = job("span-big", SPHERE, INDEX, (1.2,), LEVELS, anchors)
    jobs.solve(spec_of(span), tmp_path)
    (case,) = records_of(tmp_path, span)
    assert case.status != record.FAILED and case.start == "cold"


def test_a_case_beyond_its_time_is_given_up(tmp_path):
    one = job("anchors-slow", SPHERE, INDEX, SIZES[:1], LEVELS)
    jobs.solve(spec_of(one), tmp_path, limits=Limits(seconds=0.0))
    (case,) = records_of(tmp_path, one)
    assert case.status == record.FAILED and flagged(case, "no_time")
    assert reason_of(case.warning_flags).number == 3
    # The next try is not held back by the note of this one.
    Layout(tmp_path).solved_case(case.digest).unlink()
    jobs.solve(spec_of(one), tmp_path)
    (case,) = records_of(tmp_path, one)
    assert case.status != record.FAILED
    assert read_failures(Layout(tmp_path).failed) == []


@pytest.mark.parametrize("bound", ["memory", "time"])
def test_finer_lattices_respect_the_limits(tmp_path, monkeypatch, bound):
    # An accuracy that only finer lattices give; the limit allows none of them.
    one = job("anchors-fine", SPHERE, INDEX, SIZES[1:], LEVELS, refinements=2)
    hard = replace(one.accuracy, f11_relative=1e-5)
    spec = spec_of(replace(one, accuracy=hard))
    jobs.solve(spec, tmp_path / "free")
    (free,) = records_of(tmp_path / "free", one)
    assert free.levels[-1] > LEVELS[-1]
    if bound == "memory":
        most = memory.case_bytes((1.0,) * 3, (1.0,) * 4, 3, SIZES[1], LEVELS, 1e-5)
        limits = Limits(memory_bytes=most)
    else:
        # Time that passes only between attempts: the first one is always completed.
        clock = iter(range(0, 10**9, 1))
        monkeypatch.setattr(attempts.time, "monotonic", lambda: float(next(clock)))
        limits = Limits(seconds=60.0)
    jobs.solve(spec, tmp_path / "bound", limits=limits)
    (kept,) = records_of(tmp_path / "bound", one)
    assert kept.levels == LEVELS
    assert kept.status == record.SOLVED_WITH_WARNING and flagged(kept, "accuracy_not_met")


@pytest.mark.parametrize(
    ("error", "flag"),
    [(MemoryError(), "no_memory"), (np.linalg.LinAlgError("singular"), "breakdown")],
)
def test_a_case_that_breaks_down_is_data_and_the_job_goes_on(tmp_path, monkeypatch, error, flag):
    original = attempts.solve_level

    def solve_level(lattice, index, x, *rest, **more):
        if x == SIZES[0]:
            raise error
        return original(lattice, index, x, *rest, **more)

    monkeypatch.setattr(attempts, "solve_level", solve_level)
    one = job("anchors-broken", SPHERE, INDEX, SIZES, LEVELS)
    jobs.solve(spec_of(one), tmp_path)
    bad, good = records_of(tmp_path, one)
    assert bad.status == record.FAILED and flagged(bad, flag)
    assert good.status != record.FAILED


def test_reasons_are_numbered_once_and_advise():
    assert [reason.number for reason in REASONS] == [1, 2, 3, 4]
    assert all(reason.flag in record.FLAGS and len(reason.advice) > 20 for reason in REASONS)
    assert reason_of(record.FLAGS["not_converged"][0] | record.FLAGS["no_time"][0]).number == 3
    assert str(REASONS[0]).startswith("reason 1 (not_converged): ")


class Killed(BaseException):
    """As sudden as a kill: nothing catches it."""


def interrupted(tmp_path, monkeypatch, one, after):
    """Solve with a checkpoint after every product, and stop dead after so many."""
    limits = Limits(checkpoint_seconds=0.0)
    original = attempts.Checkpoint.offer
    count = 0

    def offer(self, collect):
        nonlocal count
        original(self, collect)
        count += 1
        if count == after:
            raise Killed

    with monkeypatch.context() as patch:
        patch.setattr(attempts.Checkpoint, "offer", offer)
        with pytest.raises(Killed):
            jobs.solve(spec_of(one), tmp_path, limits=limits)
    return limits


@pytest.mark.parametrize("after", [1, 3, 6])
def test_a_long_case_goes_on_from_its_best_iterate(tmp_path, monkeypatch, after):
    one = job("anchors-long", SPHERE, INDEX, (2.5,), (10, 12, 16), tolerance=1e-6)
    jobs.solve(spec_of(one), tmp_path / "whole")
    (whole,) = records_of(tmp_path / "whole", one)
    limits = interrupted(tmp_path / "cut", monkeypatch, one, after)
    (saved,) = Layout(tmp_path / "cut").checkpoints.glob("*.npz")
    used = []
    original = attempts.solve_level

    def solve_level(*args, **more):
        level = original(*args, **more)
        used.append(level.solution.products)
        return level

    monkeypatch.setattr(attempts, "solve_level", solve_level)
    jobs.solve(spec_of(one), tmp_path / "cut", limits=limits)
    (resumed,) = records_of(tmp_path / "cut", one)
    # Products are counted over both tries; what was done before is not done again but for
    # one product a lattice that tells how good its iterate is.
    assert sum(used) < 3 * resumed.products
    assert resumed.products <= whole.products + 2.0
    for name, (value, _) in whole.scalars.items():
        # Amplitudes agree to the tolerance of 1e-6; absorption is linear in the residual.
        assert resumed.scalars[name][0] == pytest.approx(value, rel=1e-4), name
    assert resumed.scalars["extinction_efficiency"][0] == pytest.approx(
        mie.sphere(INDEX, 2.5).extinction_efficiency, rel=0.02
    )
    # A finished case needs no checkpoint.
    assert not saved.exists()


def test_an_unreadable_checkpoint_is_named_and_costs_only_time(tmp_path, monkeypatch, capsys):
    one = job("anchors-long", SPHERE, INDEX, (2.0,), LEVELS)
    limits = interrupted(tmp_path, monkeypatch, one, 3)
    (saved,) = Layout(tmp_path).checkpoints.glob("*.npz")
    saved.write_bytes(saved.read_bytes()[:-40])
    jobs.solve(spec_of(one), tmp_path, limits=limits)
    assert str(saved) in capsys.readouterr().err
    jobs.solve(spec_of(one), tmp_path / "whole")
    (one_way,), (other,) = records_of(tmp_path, one), records_of(tmp_path / "whole", one)
    # Solved from nothing both times; to save the fields they are summed earlier, which
    # rounds otherwise in single precision.
    assert one_way.products == other.products
    np.testing.assert_allclose(one_way.expansion, other.expansion, rtol=0, atol=1e-5)


def test_short_cases_write_no_checkpoint(tmp_path, monkeypatch):
    monkeypatch.setattr(
        "scatterloom.store.checkpoint.write_fields", lambda *_: pytest.fail("written")
    )
    jobs.solve(spec_of(job("anchors-short", SPHERE, INDEX, (0.6,), LEVELS)), tmp_path)


def test_memory_of_a_case_is_measured(tmp_path):
    one = job("anchors-one", SPHERE, INDEX, (1.0,), LEVELS)
    jobs.solve(spec_of(one), tmp_path)
    (case,) = records_of(tmp_path, one)
    beat = json.loads((Layout(tmp_path).progress / "anchors-one.json").read_bytes())
    # A Python process with its numerical libraries loaded; this one is the test's.
    assert 50e6 < case.memory_bytes < 5e9
    assert beat["peak_bytes"] >= case.memory_bytes
    assert beat["solved"] == 1 and beat["seconds"] > 0.0


def test_a_case_too_large_for_memory_is_solved_on_disk(tmp_path, monkeypatch):
    one = job("anchors-disk", SPHERE, INDEX, SIZES[1:], LEVELS)
    task = jobs.task_of(spec_of(one))
    whole, spilled = (attempts._needed(task, SIZES[1], LEVELS, 0, on) for on in (False, True))
    asked = []
    original = attempts.solve_level

    def watched(*args, **kwargs):
        asked.append(kwargs["spill"])
        return original(*args, **kwargs)

    monkeypatch.setattr(attempts, "solve_level", watched)
    jobs.solve(spec_of(one), tmp_path / "disk", limits=Limits(memory_bytes=(whole + spilled) / 2))
    assert asked == [Layout(tmp_path / "disk").checkpoints] * 3
    jobs.solve(spec_of(one), tmp_path / "memory")
    assert asked[3:] == [None] * 3
    (beyond,), (within,) = (records_of(tmp_path / name, one) for name in ("disk", "memory"))
    np.testing.assert_array_equal(beyond.expansion, within.expansion)


@pytest.mark.parametrize("share", [0.0, 0.5, 2.0])
def test_fields_stay_within_their_disk_space(tmp_path, capsys, share):
    anchors = job("anchors-ball", SPHERE, INDEX, SIZES, LEVELS)
    span = job("span-ball", SPHERE, INDEX, (1.2,), LEVELS, anchors)
    free = tmp_path / "free"
    jobs.solve(spec_of(anchors), free)
    whole = sum(
        rows.nbytes // 2
        for entry in read_fields(Layout(free).field_file(anchors.name))
        for level in entry.levels
        for rows in level.rows
    )
    folder = tmp_path / "bound"
    limits = Limits(fields_bytes=share * whole)
    jobs.solve(spec_of(anchors), folder, limits=limits)
    path = Layout(folder).field_file(anchors.name)
    kept = [entry for entry in read_fields(path) if entry.levels]
    assert len(kept) == {0.0: 0, 0.5: 1, 2.0: 2}[share]
    # Names and the header of the archive take a few kilobytes.
    assert path.stat().st_size <= share * whole + 8192
    assert ("solver.fields_gib is used up" in capsys.readouterr().err) == (share < 1.0)
    jobs.solve(spec_of(span), folder, limits=limits)
    (case,) = records_of(folder, span)
    assert case.status != record.FAILED
    assert case.start == ("cold" if share == 0.0 else "infill")
