"""Two touching spheres, made of triangles, against superposition of multipoles."""

import numpy as np
import pytest

from oracles import pair
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.transition.level import solve_level
from scatterloom.transition.matrix import efficiencies


@pytest.mark.parametrize("index,each", [(1.5, 0.7), (1.6 + 0.1j, 1.2)])
def test_touching_spheres(index, each):
    """d^2 through 16 and 24 cells along the axis.

    The step of the extrapolation is 0.3 to 0.5 % of the efficiencies; half of it, as for
    spheres, is more than what the contact (an error of lower order) leaves.
    """
    shape = from_spec({"kind": "sphere_chain", "monomers": 2})
    assert shape.symmetry == "axial"
    x, n_max = each * 2 ** (1 / 3), 8
    coarse, fine = (
        solve_level(lattice(shape, n), index, x, n_max, 1e-5).transition for n in (16, 24)
    )
    best = type(fine)(fine.matrix + (fine.matrix - coarse.matrix) * 256 / 320, fine.labels)
    blocks = pair.pair(index, each, n_max, 12)
    found, expected = efficiencies(best, x), pair.efficiencies(blocks, each)
    assert found == pytest.approx(expected, rel=2.5e-3)
    # invariants of the matrix: singular values, those of m > 0 twice
    values = [np.linalg.svd(t, compute_uv=False) for t in blocks.values()]
    known = np.sort(np.concatenate([values[0], *[np.repeat(v, 2) for v in values[1:]]]))[::-1]
    ours = np.linalg.svd(best.matrix, compute_uv=False)
    np.testing.assert_allclose(ours[:8], known[:8], atol=2.5e-3 * known[0])
