"""Cases shared between campaigns: found by physics and accuracy, checked, never worse."""

import os
from dataclasses import replace

import pytest

from job_kit import job, records_of, spec_of
from lattice_kit import OBLATE, SPHERE
from scatterloom import jobs
from scatterloom.campaign import effort
from scatterloom.campaign.case import Accuracy
from scatterloom.errors import BadInput
from scatterloom.scattering import record
from scatterloom.store.library import CaseLibrary, physics_digest
from scatterloom.store.reuse import reuse_wanted

INDEX = 1.5 + 0.01j
SIZES = (0.6, 0.7)
LEVELS = (8, 10, 12)
REUSED = record.FLAGS["reused"][0]
LOOSE = Accuracy(f11_relative=0.2, ratio_absolute=0.1, efficiency_relative=0.1)


@pytest.fixture
def counted(monkeypatch):
    sizes = []
    original = jobs.solve_case

    def solve_case(task, digest, x, *rest):
        sizes.append(x)
        return original(task, digest, x, *rest)

    monkeypatch.setattr(jobs, "solve_case", solve_case)
    return sizes


@pytest.fixture
def library(tmp_path):
    return CaseLibrary(tmp_path / "library")


def solve(one, folder, library):
    jobs.solve(spec_of(one), folder, library=library)
    return records_of(folder, one)


def files(tmp_path):
    return sorted((tmp_path / "library").rglob("*.case"))


def anchors(shape=SPHERE, accuracy=LOOSE, sizes=SIZES):
    one = job("anchors-one", shape, INDEX, sizes, LEVELS)
    # Digests as the campaign would make them: they depend on the accuracy.
    cases = tuple(
        (f"{accuracy.f11_relative}".replace(".", "")[:2] + d[2:], x) for d, x in one.cases
    )
    return replace(one, accuracy=accuracy, cases=cases)


def test_a_second_campaign_solves_nothing(tmp_path, counted, library):
    first = solve(anchors(), tmp_path / "a", library)
    assert counted == list(SIZES)
    # No space is taken: the library and the campaign share the file.
    assert [path.stat().st_nlink for path in files(tmp_path)] == [2, 2]
    # Fields are wanted by nobody: the job files of the campaign say so.
    spans = tmp_path / "b" / "jobs"
    spans.mkdir(parents=True)
    (spans / "span-none.json").write_text('{"needs": [], "cases": []}')
    second = solve(anchors(), tmp_path / "b", library)
    assert counted == list(SIZES)
    for one, two in zip(first, second, strict=True):
        assert two.warning_flags == one.warning_flags | REUSED
        assert two.status == one.status
        assert two.scalars == one.scalars
        assert (two.expansion == one.expansion).all()
    # What was taken from the library is not put back.
    assert len(files(tmp_path)) == 2


def test_without_the_library_all_is_solved(tmp_path, counted, library):
    solve(anchors(), tmp_path / "a", library)
    again = solve(anchors(), tmp_path / "b", None)
    assert counted == 2 * list(SIZES)
    assert not any(case.warning_flags & REUSED for case in again)


@pytest.mark.parametrize(
    "other",
    [
        lambda one: replace(one, shape=OBLATE),
        lambda one: replace(one, index=1.6 + 0.01j),
        lambda one: replace(one, levels=(8, 12), refinements=0),
        lambda one: replace(one, tolerance=2e-4),
        lambda one: replace(one, cases=tuple((d, x + 1e-9) for d, x in one.cases)),
    ],
    ids=["shape", "index", "levels", "tolerance", "size"],
)
def test_other_physics_is_not_found(tmp_path, library, other):
    one = anchors(sizes=SIZES[:1])
    solve(one, tmp_path / "a", library)
    changed = spec_of(other(one))
    digest, x = changed["cases"][0]
    assert library.find(changed, x, digest) is None
    assert library.find(spec_of(one), SIZES[0], one.cases[0][0]) is not None


def test_a_more_accurate_case_serves_and_a_less_accurate_one_does_not(tmp_path, library):
    fine = Accuracy(f11_relative=0.1, ratio_absolute=0.1, efficiency_relative=0.05)
    (solved,) = solve(anchors(accuracy=fine, sizes=SIZES[:1]), tmp_path / "a", library)
    assert not solved.warning_flags & record.FLAGS["accuracy_not_met"][0]
    coarse = anchors(sizes=SIZES[:1])
    found = library.find(spec_of(coarse), SIZES[0], "d" * 20)
    assert found is not None
    assert found.digest == "d" * 20
    assert found.warning_flags & REUSED
    # What the program chooses for an accuracy, lattices and tolerance, is no physics.
    free, fine_free = (
        spec_of(replace(anchors(accuracy=a, sizes=SIZES[:1]), refinements=2, levels=levels))
        for a, levels in ((LOOSE, (6, 8)), (fine, (8, 12)))
    )
    for spec in (free, fine_free):
        spec["tolerance"] = effort.operator_tolerance(spec["accuracy"]["ratio_absolute"])
    assert physics_digest(free, SIZES[0]) == physics_digest(fine_free, SIZES[0])
    stricter = Accuracy(f11_relative=0.01, ratio_absolute=0.1, efficiency_relative=0.05)
    asked = spec_of(anchors(accuracy=stricter, sizes=SIZES[:1]))
    assert library.find(asked, SIZES[0], "d" * 20) is None


def test_a_more_accurate_case_that_missed_its_goal_is_judged_anew(tmp_path, library):
    hopeless = Accuracy(f11_relative=1e-6, ratio_absolute=0.1, efficiency_relative=0.1)
    (solved,) = solve(anchors(accuracy=hopeless, sizes=SIZES[:1]), tmp_path / "a", library)
    assert solved.warning_flags & record.FLAGS["accuracy_not_met"][0]
    one = anchors(sizes=SIZES[:1])
    found = library.find(spec_of(one), SIZES[0], one.cases[0][0])
    assert found is not None
    assert not found.warning_flags & record.FLAGS["accuracy_not_met"][0]
    asked = spec_of(anchors(accuracy=replace(hopeless, f11_relative=1e-5), sizes=SIZES[:1]))
    assert library.find(asked, SIZES[0], "d" * 20) is None


@pytest.mark.parametrize("damage", ["flip", "cut", "other case"])
def test_a_damaged_entry_is_named_removed_and_solved_again(
    tmp_path, counted, library, capsys, damage
):
    one = anchors()
    solve(one, tmp_path / "a", library)
    first, second = files(tmp_path)
    content = first.read_bytes()
    first.unlink()  # parts the link from the campaign's own file
    if damage == "flip":
        content = content[:-5] + bytes([content[-5] ^ 1]) + content[-4:]
    elif damage == "cut":
        content = content[:-9]
    else:
        content = second.read_bytes()
    first.write_bytes(content)
    counted.clear()
    found = solve(one, tmp_path / "b", library)
    assert str(first) in capsys.readouterr().err
    # The other anchor too is solved, for its fields; its record is the one reused.
    assert sorted(bool(case.warning_flags & REUSED) for case in found) == [False, True]
    assert len(files(tmp_path)) == 2
    assert library.find(spec_of(one), SIZES[0], one.cases[0][0]) is not None
    assert library.find(spec_of(one), SIZES[1], one.cases[1][0]) is not None


def test_a_library_that_cannot_be_written_stops_nothing(tmp_path, library, capsys):
    (tmp_path / "library").write_text("in the way")
    found = solve(anchors(), tmp_path / "a", library)
    assert len(found) == 2
    assert "not added to the case library" in capsys.readouterr().err


def test_failed_cases_are_not_shared(tmp_path, library):
    one = anchors(sizes=SIZES[:1])
    (solved,) = solve(one, tmp_path / "a", None)
    path = tmp_path / "a/state/cases" / solved.digest[:2] / f"{solved.digest}.case"
    library.add(spec_of(one), replace(solved, status=record.FAILED), path)
    library.add(spec_of(one), replace(solved, warning_flags=REUSED), path)
    assert files(tmp_path) == []


def test_the_environment_goes_before_the_configuration(monkeypatch):
    monkeypatch.delenv("SCATTERLOOM_CASE_REUSE", raising=False)
    assert reuse_wanted(True) and not reuse_wanted(False)
    monkeypatch.setenv("SCATTERLOOM_CASE_REUSE", "off")
    assert not reuse_wanted(True)
    monkeypatch.setenv("SCATTERLOOM_CASE_REUSE", "on")
    assert reuse_wanted(False)
    monkeypatch.setenv("SCATTERLOOM_CASE_REUSE", "perhaps")
    with pytest.raises(BadInput, match="found 'perhaps'"):
        reuse_wanted(True)


def test_a_file_system_without_links_is_served_by_copies(tmp_path, library, monkeypatch):
    def refuse(*_):
        raise OSError(18, "Invalid cross-device link")

    monkeypatch.setattr(os, "link", refuse)
    solve(anchors(sizes=SIZES[:1]), tmp_path / "a", library)
    (path,) = files(tmp_path)
    assert path.stat().st_nlink == 1
