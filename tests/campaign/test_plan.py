"""Jobs: every case once, anchors around every span, few jobs, stable names."""

import json
from itertools import pairwise

import pytest

from campaign.bad_configs import edited
from scatterloom.campaign import effort, load
from scatterloom.campaign import plan as plans
from scatterloom.campaign.expand import expand
from scatterloom.campaign.outlook import job_bytes, outlook
from scatterloom.campaign.plan import choose_anchors, plan
from scatterloom.errors import BadInput

# Levels by x, so that ladders are cut to segments; fine sizes, so that there are spans.
FINE = (
    *("ratio: 1.2", "ratio: 1.01"),
    *("levels: [12, 16, 24], ", ""),
)


@pytest.fixture(autouse=True)
def fixed_effort(monkeypatch):
    """Rules of effort of the tests' own: tuning the real ones must not change what is tested."""

    def levels(axes, index, x, f11_relative=0.02):
        return (12, 16, 24) if x * max(axes) < 5.0 else (16, 24, 32)

    monkeypatch.setattr(effort, "levels", levels)
    monkeypatch.setattr(effort, "anchor_step", lambda index, x: 0.3)
    monkeypatch.setattr(effort, "operator_tolerance", lambda ratio_absolute: 1e-4)
    monkeypatch.setattr(effort, "cost", lambda axes, index, x, cold, planes: 4.0 if cold else 1.0)


@pytest.fixture
def grid_of(tmp_path):
    def make(*pieces: str):
        path = tmp_path / "campaign.yaml"
        path.write_text(edited(*pieces))
        return expand(load(path))

    return make


def test_every_case_is_solved_once(grid_of):
    grid = grid_of(*FINE)
    solved = [digest for job in plan(grid) for digest, _ in job.cases]
    assert len(solved) == len(set(solved))
    assert set(solved) == {case.digest for case in grid.cases}


def test_jobs_are_consistent(grid_of):
    jobs = plan(grid_of(*FINE))
    done = {}
    for job in jobs:
        sizes = [x for _, x in job.cases]
        assert sizes == sorted(sizes)
        if job.kind == "anchors":
            assert job.needs == job.anchors == ()
            done.update({digest: job for digest, _ in job.cases})
            continue
        places = [x for _, x, _ in job.anchors]
        assert places == sorted(places)
        for digest, x, name in job.anchors:
            # The anchor was planned before, on the same lattices, in the job named.
            assert done[digest].name == name
            assert (digest, x) in done[digest].cases
            assert (done[digest].levels, done[digest].index) == (job.levels, job.index)
        assert set(job.needs) == {name for _, _, name in job.anchors}
        for x in sizes:
            assert any(place < x for place in places) and any(place > x for place in places)
    assert {job.kind for job in jobs} == {"anchors", "span"}
    assert len({job.name for job in jobs}) == len(jobs)


def test_four_anchors_around_every_size(grid_of):
    """Two on either side; at the ends of a ladder the four nearest the end."""
    jobs = plan(grid_of(*FINE))
    anchors = {}
    for job in jobs:
        if job.kind == "anchors":
            key = (json.dumps(job.shape), job.index, job.levels)
            anchors.setdefault(key, []).extend(x for _, x in job.cases)
    for job in (job for job in jobs if job.kind == "span"):
        ladder = anchors[json.dumps(job.shape), job.index, job.levels]
        given = [x for _, x, _ in job.anchors]
        assert given == sorted(given) and set(given) <= set(ladder)
        for _, size in job.cases:
            below = sum(x < size for x in ladder)
            first = max(0, min(below - 2, len(ladder) - 4))
            assert set(ladder[first : first + 4]) <= set(given)


def test_ladders_merge_wavelengths(grid_of):
    """One ladder for both wavelengths: a job holds sizes of either."""
    grid = grid_of(*FINE)
    of_wavelength = [{grid.cases[i].digest for i in grid.where[:, w].ravel()} for w in range(2)]
    only = [of_wavelength[0] - of_wavelength[1], of_wavelength[1] - of_wavelength[0]]
    assert all(only)
    mixed = [
        job
        for job in plan(grid)
        if all(any(digest in part for digest, _ in job.cases) for part in only)
    ]
    assert mixed


def test_segments_have_equal_levels(grid_of):
    for job in plan(grid_of(*FINE)):
        a = 2.0 ** (1 / 3)
        axes = (a, a, a / 2) if job.shape["kind"] == "spheroid" else (1.0, 1.0, 1.0)
        assert {effort.levels(axes, job.index, x) for _, x in job.cases} == {job.levels}


def test_overrides(grid_of):
    jobs = plan(grid_of("[12, 16, 24]", "[8, 12]", "job_seconds", "tolerance: 1e-6, job_seconds"))
    assert {job.levels for job in jobs} == {(8, 12)}
    assert {job.tolerance for job in jobs} == {1e-6}
    jobs = plan(grid_of(*FINE, "job_seconds", "anchor_spacing: 0.05, job_seconds"))
    anchors = sum(len(job.cases) for job in jobs if job.kind == "anchors")
    assert anchors > outlook(grid_of(*FINE), plan(grid_of(*FINE))).anchors


@pytest.mark.parametrize(
    ("sizes", "step", "anchors"),
    [
        ([1.0], 0.3, [0]),
        ([1.0, 1.1], 0.3, [0, 1]),
        ([1.0, 1.1, 1.2], 0.3, [0, 2]),
        ([1.0, 1.1, 1.2, 1.3, 1.4], 0.25, [0, 2, 4]),
        ([1.0, 2.0, 3.0], 0.3, [0, 1, 2]),
        ([1.0, 1.1, 2.0, 2.1, 2.2], 0.3, [0, 1, 2, 4]),
        ([1.0, 1.1, 1.2, 1.3], 100.0, [0, 3]),
    ],
)
def test_anchors(sizes, step, anchors):
    assert choose_anchors(sizes, lambda x: step) == anchors


def test_gap_between_anchors_shrinks_with_the_step():
    sizes = [1.0 + 0.01 * i for i in range(400)]
    anchors = choose_anchors(sizes, lambda x: 1.0 / x)
    for low, high in pairwise(anchors):
        assert sizes[high] - sizes[low] <= 1.0 / sizes[high] + 1e-12
    assert (anchors[0], anchors[-1]) == (0, 399)


def test_larger_sizes_leave_anchors_as_they_were():
    sizes = [1.0 * 1.02**i for i in range(100)]
    short = choose_anchors(sizes[:70], lambda x: 0.3)
    assert choose_anchors(sizes, lambda x: 0.3)[: len(short) - 1] == short[:-1]


def test_jobs_are_about_as_long_as_asked(grid_of, monkeypatch):
    grid = grid_of(*FINE)
    jobs = plan(grid)
    assert max(job.seconds for job in jobs) <= 20.0
    assert len(jobs) < 2 * sum(job.seconds for job in jobs) / 20.0 + 8
    # A campaign of minutes is shared out whatever is asked, and not if it may be one job.
    asked = grid_of(*FINE, "job_seconds: 20", "job_seconds: 2000")
    assert [job.name for job in plan(asked)] == [job.name for job in jobs]
    monkeypatch.setattr(plans, "SHARES", 1)
    long = plan(asked)
    # Two ladders of two segments, each with one job of anchors and one of spans.
    assert len(long) == 8


def test_a_span_longer_than_a_job_is_cut(grid_of):
    grid = grid_of("ratio: 1.2", "ratio: 1.001")
    spans = [job for job in plan(grid) if job.kind == "span"]
    assert max(job.seconds for job in spans) <= 20.0
    shared = [first for first, second in pairwise(spans) if first.anchors == second.anchors]
    assert shared, "no span was cut"


def test_number_of_jobs_is_bounded(grid_of, monkeypatch):
    grid = grid_of(*FINE)
    number = len(plan(grid))
    monkeypatch.setattr(plans, "MOST_JOBS", 20)
    assert 8 <= len(plan(grid)) <= 20 < number
    monkeypatch.setattr(plans, "MOST_JOBS", 7)
    with pytest.raises(BadInput, match="needs 8 jobs, more than 7"):
        plan(grid)


def test_plan_and_names_are_reproducible(grid_of):
    first, second = plan(grid_of(*FINE)), plan(grid_of(*FINE))
    assert [job.spec() for job in first] == [job.spec() for job in second]


def test_names_follow_the_physics_only(grid_of):
    names = {job.name for job in plan(grid_of())}
    neutral = grid_of(
        "Silt and salt",
        "Title",
        "step: 1}",
        "step: 2}",
        "name: ball",
        "name: b",
        "ball: 0.3",
        "b: 0.3",
    )
    assert {job.name for job in plan(neutral)} == names
    assert {job.name for job in plan(grid_of("k: 0.003", "k: 0.004"))} != names


def test_other_particles_keep_their_jobs(grid_of):
    names = {job.name for job in plan(grid_of())}
    rod = "  - {name: rod, material: salt, shape: {kind: spheroid, equatorial_to_polar: 0.5}}\n"
    assert {job.name for job in plan(grid_of("sizes:", rod + "sizes:"))} > names


def test_specification_survives_json(grid_of):
    for job in plan(grid_of(*FINE)):
        spec = job.spec()
        assert json.loads(json.dumps(spec, allow_nan=False)) == spec
        assert spec["name"] == job.name
        assert spec["name"].startswith(f"{job.kind}-{job.shape['kind']}-")
        assert spec["numerics_revision"] == effort.NUMERICS_REVISION


def test_large_campaign(grid_of):
    """1e5 cells, dispersive enough that nothing merges: at most 1e4 jobs."""
    wavelengths = ", ".join(f"{0.4 + 0.007 * i:.3f}" for i in range(50))
    grid = grid_of("[0.5, 1.0]", f"[{wavelengths}]", "ratio: 1.2", "count: 1000")
    assert grid.where.size == 100_000
    jobs = plan(grid)
    assert len(jobs) <= plans.MOST_JOBS
    assert sum(len(job.cases) for job in jobs) == len(grid.cases)


def test_outlook(grid_of):
    grid = grid_of(*FINE)
    jobs = plan(grid)
    forecast = outlook(grid, jobs)
    anchors = sum(len(job.cases) for job in jobs if job.kind == "anchors")
    assert (forecast.cells, forecast.cases, forecast.jobs) == (
        grid.where.size,
        len(grid.cases),
        len(jobs),
    )
    # The costs of this test: 4 s for an anchor, 1 s for a size between.
    seconds = 4.0 * anchors + 1.0 * (len(grid.cases) - anchors)
    assert forecast.core_hours == pytest.approx(seconds / 3600.0, rel=1e-12)
    assert forecast.finest_cells_across == 32
    assert forecast.largest_job_bytes == max(job_bytes(job) for job in jobs)


def test_single_size(grid_of):
    jobs = plan(grid_of("{from: 0.1, to: 1.0, ratio: 1.2}", "[0.1]", "[0.5, 1.0]", "[0.5]"))
    assert [job.kind for job in jobs] == ["anchors", "anchors"]
