"""Cells and cases: equal cases merge, and nothing but the physics identifies a case."""

import math
from fractions import Fraction

import numpy as np
import pytest

from campaign.bad_configs import GOOD, edited
from scatterloom.campaign import effort, load
from scatterloom.campaign.expand import expand
from scatterloom.campaign.geometry import canonical, extents


@pytest.fixture
def grid_of(tmp_path):
    def make(text: str):
        path = tmp_path / "campaign.yaml"
        path.write_text(text)
        return expand(load(path))

    return make


def digests(grid) -> set[str]:
    return {case.digest for case in grid.cases}


def test_every_cell_has_its_case(grid_of):
    grid = grid_of(edited("medium: {index: 1.0}", "medium: {index: 1.25}"))
    assert grid.where.shape == (2, 2, 13)
    assert sorted(set(grid.where.ravel())) == list(range(len(grid.cases)))
    for p in range(2):
        for w in range(2):
            for s in range(13):
                case = grid.cases[grid.where[p, w, s]]
                x = 2 * math.pi * grid.radius_um[w, s] * 1.25 / grid.wavelength_um[w]
                assert case.size_parameter == pytest.approx(x, rel=1.1e-11)
                assert case.size_parameter == grid.size_parameter[w, s]
                assert case.index.real == grid.refractive_index_n[p, w]
                assert case.index.imag == grid.refractive_index_k[p, w]
                assert case.shape["kind"] == ("spheroid", "sphere")[p]
    assert grid.cases[0].index == 1.224 + 0.0024j  # (1.53 + 0.003i) / 1.25
    assert np.all(grid.radius_um[:, 0] == 0.1)


def test_sizes_given_as_size_parameters(grid_of):
    grid = grid_of(
        edited("radius_um: {from: 0.1, to: 1.0, ratio: 1.2}", "size_parameter: [1, 2.5]")
    )
    # The indices do not depend on wavelength, so both wavelengths share all cases.
    assert len(grid.cases) == 4
    assert grid.size_parameter.tolist() == [[1.0, 2.5], [1.0, 2.5]]
    assert grid.radius_um[1, 1] == pytest.approx(2.5 / (2 * math.pi), rel=1e-11)


def test_equal_sizes_at_several_wavelengths_are_one_case(grid_of):
    text = edited(
        "{from: 0.1, to: 1.0, ratio: 1.2}",
        "[0.05, 0.07, 0.1, 0.14, 0.2, 0.28, 0.3]",
        "[0.5, 1.0]",
        "[0.35, 0.5, 0.7, 1.0]",
    )
    grid = grid_of(text)
    radii, wavelengths = (5, 7, 10, 14, 20, 28, 30), (35, 50, 70, 100)  # in units of 10 nm
    ratios = {Fraction(r, w) for r in radii for w in wavelengths}
    assert len(grid.cases) == 2 * len(ratios) < 2 * 28


@pytest.mark.parametrize("per_doubling", [1, 3, 7, 18, 50])
def test_sizes_per_doubling_merge_between_wavelengths_a_factor_of_two_apart(grid_of, per_doubling):
    text = edited(
        "{from: 0.1, to: 1.0, ratio: 1.2}",
        f"{{from: 0.13, to: 1.04, per_doubling: {per_doubling}}}",
        "[0.5, 1.0]",
        "[0.532, 1.064]",
    )
    grid = grid_of(text)
    n_size = 3 * per_doubling + 1
    assert grid.where.shape == (2, 2, n_size)
    # Only the lowest doubling of the longer wavelength is not among those of the shorter.
    assert len(grid.cases) == 2 * (n_size + per_doubling)


def test_equal_bodies_are_one_case(grid_of):
    bodies = [
        "{kind: ellipsoid, axes: [2, 2, 2]}",
        "{kind: spheroid, equatorial_to_polar: 1}",
        "{kind: sphere}",
    ]
    grids = [grid_of(edited("{kind: sphere}", body)) for body in bodies]
    assert digests(grids[0]) == digests(grids[1]) == digests(grids[2])


NEUTRAL = {
    "title": ("Silt and salt", "Another title"),
    "campaign": ("campaign: saltmere", "campaign: other"),
    "angles": ("step: 1}", "step: 2}"),
    "particle name": ("name: ball", "name: drop", "ball: 0.3", "drop: 0.3"),
    "material name": ("  silt: {", "  mud: {", "material: silt", "material: mud"),
    "population": ("radius_um: 0.2, ", "radius_um: 0.21, "),
    "no population": (
        "populations:",
        "populations: []\nprovenance:",
        GOOD[GOOD.index("  - name: haze") : GOOD.index("solver")],
        "  creator: nobody\n",
    ),
    "job length": ("job_seconds: 20", "job_seconds: 50"),
    "scale": (
        *("[0.5, 1.0]", "[1.0, 2.0]"),
        *("{from: 0.1, to: 1.0, ratio: 1.2}", "{from: 0.2, to: 2.0, ratio: 1.2}"),
    ),
}


@pytest.mark.parametrize("name", NEUTRAL)
def test_edits_that_solve_nothing_again(name, grid_of):
    assert digests(grid_of(edited(*NEUTRAL[name]))) == digests(grid_of(GOOD))


GROWTH = {
    "sizes": ("to: 1.0, ", "to: 2.0, "),
    "wavelength": ("[0.5, 1.0]", "[0.4, 0.5, 0.7, 1.0]"),
    "particle": (
        "sizes:",
        "  - {name: rod, material: salt, shape: {kind: spheroid, equatorial_to_polar: 0.5}}\n"
        "sizes:",
    ),
}


@pytest.mark.parametrize("name", GROWTH)
def test_growth_keeps_every_case(name, grid_of):
    assert digests(grid_of(edited(*GROWTH[name]))) > digests(grid_of(GOOD))


PHYSICS = {
    "index": ("k: 0.003", "k: 0.0031"),
    "medium": ("index: 1.0", "index: 1.01"),
    "shape": ("equatorial_to_polar: 2.0", "equatorial_to_polar: 2.01"),
    "accuracy": ("ratio_absolute: 0.01", "ratio_absolute: 0.011"),
    "levels": ("[12, 16, 24]", "[12, 16, 26]"),
    "tolerance": ("job_seconds", "tolerance: 1e-5, job_seconds"),
}


@pytest.mark.parametrize("name", PHYSICS)
def test_edits_that_make_other_cases(name, grid_of):
    assert not digests(grid_of(GOOD)) >= digests(grid_of(edited(*PHYSICS[name])))


def test_numerics_revision_makes_other_cases(grid_of, monkeypatch):
    before = digests(grid_of(GOOD))
    monkeypatch.setattr(effort, "NUMERICS_REVISION", effort.NUMERICS_REVISION + 1)
    assert before.isdisjoint(digests(grid_of(GOOD)))


def test_digest_is_the_same_on_every_machine(grid_of, monkeypatch):
    """A frozen value: if it changes, every finished case of every user is lost."""
    monkeypatch.setattr(effort, "NUMERICS_REVISION", 1)
    text = edited("radius_um: {from: 0.1, to: 1.0, ratio: 1.2}", "size_parameter: [1, 2.5]")
    assert grid_of(text).cases[1].digest == "60e4b0efbfb8ccd8d0fc"


@pytest.mark.parametrize(
    ("spec", "expected"),
    [
        ({"kind": "sphere"}, (1.0, 1.0, 1.0)),
        ({"kind": "spheroid", "equatorial_to_polar": 8.0}, (2.0, 2.0, 0.25)),
        ({"kind": "ellipsoid", "axes": [4.0, 2.0, 1.0]}, (2.0, 1.0, 0.5)),
    ],
)
def test_extents_of_ellipsoids(spec, expected):
    reach = extents(spec)
    assert reach.half == reach.lengths == pytest.approx(expected, rel=1e-15)
    assert math.prod(reach.half) == pytest.approx(1.0, rel=1e-15)
    assert reach.circumscribed_radius == max(reach.half)


def test_unknown_shape_is_refused():
    with pytest.raises(ValueError, match="unknown shape kind 'torus'"):
        extents({"kind": "torus"})


def test_canonical_shapes():
    assert canonical({"kind": "ellipsoid", "axes": [2, 2, 1]}) == {
        "kind": "spheroid",
        "equatorial_to_polar": 2.0,
    }
    assert canonical({"kind": "ellipsoid", "axes": [0.3, 0.2, 0.1]}) == {
        "kind": "ellipsoid",
        "axes": [3.0, 2.0, 1.0],
    }
    # The axes stay in their order: it is the frame of the transition matrix.
    assert canonical({"kind": "ellipsoid", "axes": [1, 2, 4]})["axes"] == [0.25, 0.5, 1.0]
