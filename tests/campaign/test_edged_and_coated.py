"""Cuboids, prisms and coatings from the campaign file to cases, jobs and their names."""

import json
import math

import numpy as np
import pytest

from campaign.bad_configs import GOOD, edited
from scatterloom.campaign import load, memory
from scatterloom.campaign.expand import expand
from scatterloom.campaign.geometry import canonical, extents
from scatterloom.campaign.outlook import outlook
from scatterloom.campaign.plan import plan
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

SPECS = [
    {"kind": "sphere"},
    {"kind": "spheroid", "equatorial_to_polar": 0.3},
    {"kind": "ellipsoid", "axes": [3.0, 2.0, 1.0]},
    {"kind": "cuboid", "edges": [1, 1, 1]},
    {"kind": "cuboid", "edges": [3, 2, 1]},
    *(
        {"kind": "prism", "sides": sides, "height_to_width": ratio}
        for sides in (3, 4, 5, 6, 8)
        for ratio in (0.2, 2.0)
    ),
    {"kind": "prism", "sides": 6, "height_to_width": 1.5, "core_radius_fraction": 0.6},
]
COATING = "{kind: sphere}\n    coating: {material: silt, core_radius_fraction: 0.6}"


@pytest.fixture
def grid_of(tmp_path):
    def make(*pieces: str):
        path = tmp_path / "campaign.yaml"
        path.write_text(edited(*pieces))
        campaign = load(path)
        assert campaign.warnings == ()
        return expand(campaign)

    return make


def digests(grid) -> set[str]:
    return {case.digest for case in grid.cases}


@pytest.mark.parametrize("spec", SPECS, ids=str)
def test_extents_are_those_of_the_particle(spec):
    """Predictions know the same body as the lattice does."""
    reach, shape = extents(spec), from_spec(spec)
    assert reach.half == pytest.approx(shape.half_extents, rel=1e-13)
    assert reach.circumscribed_radius == pytest.approx(shape.circumscribed_radius, rel=1e-13)
    assert max(reach.radii) == reach.circumscribed_radius
    nested = [scale * half for scale in shape.scales for half in shape.half_extents]
    assert reach.lengths == pytest.approx(nested, rel=1e-13)
    assert reach.mirror_planes == sum(lattice(shape, 4).mirrors)


def test_canonical_bodies():
    assert canonical({"kind": "cuboid", "edges": [2, 3, 2]})["edges"] == [1.0, 1.5, 1.0]
    prism = {"kind": "prism", "sides": 6, "height_to_width": 1 / 3}
    assert canonical(prism)["height_to_width"] == 0.333333333333
    # a core stays with a shape that turns out to be a simpler one
    coated = {"kind": "spheroid", "equatorial_to_polar": 1.0, "core_radius_fraction": 0.5}
    assert canonical(coated) == {"kind": "sphere", "core_radius_fraction": 0.5}
    for spec in SPECS:
        again = canonical(canonical(spec))
        assert again == canonical(spec)
        assert from_spec(again).half_extents == pytest.approx(
            from_spec(spec).half_extents, rel=1e-11
        )


def test_equal_edged_bodies_are_one_case(grid_of):
    bodies = ("{kind: cuboid, edges: [2, 2, 1]}", "{kind: cuboid, edges: [3.0, 3.0, 1.5]}")
    one, other = (digests(grid_of("{kind: sphere}", body)) for body in bodies)
    assert one == other


def test_coated_particle(grid_of):
    grid = grid_of("{kind: sphere}", COATING, "medium: {index: 1.0}", "medium: {index: 1.25}")
    plain = grid_of("medium: {index: 1.0}", "medium: {index: 1.25}")
    case = grid.cases[grid.where[1, 0, 0]]
    # silt around salt: the index of the coating comes first, both relative to the medium
    assert case.indices == (1.224 + 0.0024j, 1.2 + 0j)
    assert case.index == case.indices[0]
    assert case.shape == {"kind": "sphere", "core_radius_fraction": 0.6}
    assert grid.refractive_index_n[1, 0] == 1.224 and grid.refractive_index_k[1, 0] == 0.0024
    assert grid.core_refractive_index[1, 0] == 1.2 and np.isnan(grid.core_refractive_index[0, 0])
    # the other particle and its cases are what they were
    assert digests(plain) & digests(grid) == {plain.cases[i].digest for i in plain.where[0].ravel()}
    # sizes are those of the whole particle
    assert grid.radius_um[0, 0] == plain.radius_um[0, 0]


def test_core_by_volume_or_by_radius(grid_of):
    by_volume = COATING.replace("core_radius_fraction: 0.6", "core_volume_fraction: 0.216")
    one = digests(grid_of("{kind: sphere}", COATING))
    assert one == digests(grid_of("{kind: sphere}", by_volume))
    other = COATING.replace("0.6", "0.61")
    assert one != digests(grid_of("{kind: sphere}", other))


def test_coating_of_the_same_index_is_no_coating(grid_of):
    same = grid_of("{kind: sphere}", COATING, "{n: 1.53, k: 0.003}", "{n: 1.5, k: 0.0}")
    plain = grid_of("{n: 1.53, k: 0.003}", "{n: 1.5, k: 0.0}")
    assert digests(same) == digests(plain)


def test_core_and_coating_exchanged_are_other_cases(grid_of):
    there = grid_of("{kind: sphere}", COATING)
    back = grid_of(
        "{kind: sphere}", COATING.replace("silt", "salt"), "material: salt", "material: silt"
    )
    assert there.cases[-1].shape == back.cases[-1].shape
    assert there.cases[-1].indices == back.cases[-1].indices[::-1]
    assert digests(there).isdisjoint({back.cases[i].digest for i in back.where[1].ravel()})


def test_jobs_of_coated_particles(grid_of):
    jobs = plan(grid_of("{kind: sphere}", COATING, "ratio: 1.2", "ratio: 1.05"))
    coated = [job for job in jobs if job.inner_indices]
    assert {job.kind for job in coated} == {"anchors", "span"}
    for job in coated:
        assert (job.index, job.inner_indices) == (1.53 + 0.003j, (1.5 + 0j,))
        spec = job.spec()
        assert json.loads(json.dumps(spec, allow_nan=False)) == spec
        assert spec["index"] == [1.53, 0.003] and spec["inner_indices"] == [[1.5, 0.0]]
        assert spec["shape"]["core_radius_fraction"] == 0.6
    # jobs of one material have no such key, and the names they always had
    others = [job for job in jobs if not job.inner_indices]
    assert others and all("inner_indices" not in job.spec() for job in others)


def test_more_waves_for_corners(grid_of):
    """A cube's corners reach farther than its faces: the prediction counts waves for them."""
    ball, cube = (
        plan(grid_of("{kind: sphere}", body))
        for body in ("{kind: sphere}", "{kind: cuboid, edges: [1, 1, 1]}")
    )
    assert math.fsum(job.seconds for job in cube) > 1.2 * math.fsum(job.seconds for job in ball)
    grids = [grid_of("{kind: sphere}", f"{{kind: prism, sides: {n}, height_to_width: 1}}")
             for n in (5, 6)]  # fmt: skip
    # an odd prism has one mirror plane less, so twice as many cells stand for themselves
    five, six = (
        outlook(grid, plan(grid)).largest_job_bytes - memory.PROGRAM_BYTES for grid in grids
    )
    assert five > 1.5 * six


def test_merged_file_keeps_the_coating(tmp_path):
    path = tmp_path / "campaign.yaml"
    path.write_text(edited("{kind: sphere}", COATING))
    campaign = load(path)
    again = tmp_path / "merged.yaml"
    again.write_text(campaign.merged_yaml())
    assert digests(expand(load(again))) == digests(expand(campaign))


def test_material_of_a_coating_is_used(tmp_path):
    path = tmp_path / "campaign.yaml"
    text = GOOD.replace("material: silt", "material: salt")
    path.write_text(text)
    assert [w.message for w in load(path).warnings] == [
        "material 'silt' is not used by any particle"
    ]
    path.write_text(text.replace("{kind: sphere}", COATING))
    assert load(path).warnings == ()
