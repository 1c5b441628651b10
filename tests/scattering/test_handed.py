"""Which particles may differ from their mirror image, and what the audit makes of it."""

import numpy as np
import pytest

from scatterloom.scattering.handed import may_be_handed


@pytest.mark.parametrize("particle,handed", [
    ({"shape": {"kind": "sphere"}}, False),
    ({"shape": {"kind": "prism", "sides": 5, "end_tilts_deg": [20, -30]}}, False),
    ({"shape": {"kind": "voronoi_fragment", "seed": 3}}, True),
    ({"shape": {"kind": "mesh", "file": "grain.stl"}}, True),
    # two centres and that of the ball lie in a plane
    ({"shape": {"kind": "sphere"}, "inclusions": [{"centre": [0, 0, 0.2]}] * 2}, False),
    ({"shape": {"kind": "sphere"}, "inclusions": [{"count": 3, "seed": 1}]}, True),
    ({"shape": {"kind": "cuboid"}, "inclusions": [{"centre": [0.1, 0.2, 0.3]}]}, True),
])  # fmt: skip
def test_handed(particle, handed):
    assert may_be_handed(particle) is handed


@pytest.mark.parametrize("spec", [
    {"kind": "prism", "sides": 5, "height_to_width": 1.0, "end_tilts_deg": [20.0, -30.0]},
    {"kind": "tetrahedron"},
    {"kind": "cone", "height_to_diameter": 1.0},
    {"kind": "sphere_chain", "monomers": 3},
    {"kind": "prism", "sides": 6, "height_to_width": 1.0, "indentation": 0.5},
])  # fmt: skip
def test_bodies_that_are_not_handed_have_a_mirror_plane(spec):
    from scatterloom.campaign.geometry import canonical, extents

    assert not may_be_handed({"shape": spec})
    assert extents(canonical(spec)).mirror_planes > 0
    assert np.isfinite(extents(canonical(spec)).circumscribed_radius)
