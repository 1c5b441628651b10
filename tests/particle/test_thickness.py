"""Mean thickness of the parts of a particle against the formulas."""

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.particle.thickness import has_thin_part, mean_thickness
from scatterloom.solids.mesh import MEDIUM, Interface, Solid
from solid_kit import block, globe, shape_of

TURN = Rotation.from_rotvec([0.3, 0.5, -0.2]).as_matrix()


@pytest.mark.parametrize("turn", [None, TURN])
def test_balls_and_plates(turn):
    # the area vectors of a curved surface add within a cell and lose a little of the area
    ball = lattice(from_spec({"kind": "sphere"}), 24, turn)
    assert mean_thickness(ball) == pytest.approx([24 / 3], rel=0.02)
    plate = lattice(from_spec({"kind": "cuboid", "edges": [10, 10, 1]}), 20, turn)
    assert mean_thickness(plate) == pytest.approx([2 * 400 * 2 / (2 * 400 + 4 * 40)], rel=1e-6)


def test_films():
    shell = lattice(from_spec({"kind": "sphere", "core_radius_fraction": 0.9}), 40, TURN)
    film, core = mean_thickness(shell)
    # 4/3 pi (20^3 - 18^3) over half of 4 pi (20^2 + 18^2)
    assert film == pytest.approx(2 / 3 * (20**3 - 18**3) / (20**2 + 18**2), rel=0.02)
    assert core == pytest.approx(36 / 3, rel=0.02)
    faces = (Interface(globe(3, (3, 3, 3))), Interface(block((-1, -1, -0.1), (1, 1, 0.1)), 1, 0))
    flake = mean_thickness(lattice(shape_of(Solid(faces)), 30))[1]
    assert flake == pytest.approx(30 / 6 * 2 * 0.8 / 9.6, rel=1e-2)
    assert np.isfinite(flake)


def thin(spec_or_solid, cells) -> bool:
    shape = (
        shape_of(spec_or_solid) if isinstance(spec_or_solid, Solid) else from_spec(spec_or_solid)
    )
    return has_thin_part(shape, lattice(shape, cells))


def test_what_is_too_thin():
    ball = {"kind": "sphere"}
    # shells of 2.5 and 1.5 cells around a core of 5 and 7 cells across
    assert not thin({**ball, "core_radius_fraction": 0.5}, 10)
    assert thin({**ball, "core_radius_fraction": 0.7}, 10)
    # a small core is no layer
    assert not thin({**ball, "core_radius_fraction": 0.3}, 16)
    assert not thin(ball, 4) and thin(ball, 2)

    def bubble(radius: float) -> Solid:
        return Solid((Interface(globe(3)), Interface(globe(3, (radius,) * 3), MEDIUM, 0)))

    assert not thin(bubble(0.8), 24) and thin(bubble(0.9), 24)
    # grains beside each other, 3.6 cells across, are no layers either
    grains = [globe(2).moved(np.array([2.2 * i, 0.0, 0.0])) for i in range(5)]
    assert not thin(Solid(tuple(Interface(grain) for grain in grains)), 20)
