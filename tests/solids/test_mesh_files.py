"""Meshes from files: what is read, what is refused, and that nothing but geometry is looked at."""

import io

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterloom.particle.polyhedron import prism
from scatterloom.solids.adjacency import edges_of, parts, with_smooth_pieces
from scatterloom.solids.crossing import first_crossing
from scatterloom.solids.imported import check_mesh, mesh_arrays
from scatterloom.solids.mesh import Mesh
from scatterloom.solids.mesh_file import read_mesh
from scatterloom.solids.soundness import check_closed_body, winding
from solid_kit import block, globe, joined, mesh_of, reversed_mesh

LUMP = globe(2, (1.5, 1.0, 0.7))


def written(mesh: Mesh, ending: str) -> bytes:
    """The mesh as another program writes it."""
    body = trimesh.Trimesh(mesh.corners, mesh.triangles, process=False)
    content = body.export(file_type=ending)
    return content.encode() if isinstance(content, str) else content


@pytest.mark.parametrize("ending", ["stl", "obj", "ply", "stl_ascii"])
def test_files_of_all_formats_hold_the_same_body(ending):
    arrays = read_mesh(written(LUMP, ending), f"lump.{ending[:3]}")
    assert arrays["corners"].shape == LUMP.corners.shape  # corners of an STL file are joined
    found = Mesh(arrays["corners"], arrays["triangles"], np.zeros(len(LUMP.triangles), np.int32))
    # STL holds single precision
    assert found.volume == pytest.approx(LUMP.volume, rel=1e-6)
    assert found.area == pytest.approx(LUMP.area, rel=1e-6)
    assert check_mesh(arrays) == 1
    again = read_mesh(written(LUMP, ending), f"LUMP.{ending[:3].upper()}")
    for name in arrays:
        np.testing.assert_array_equal(arrays[name], again[name])


def test_material_libraries_are_not_looked_for(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    opened = []
    content = b"mtllib ../../etc/secret.mtl\nusemtl gold\n" + written(LUMP, "obj")
    real = io.open
    monkeypatch.setattr("builtins.open", lambda *a, **k: opened.append(a) or real(*a, **k))
    arrays = read_mesh(content, "lump.obj")
    assert len(arrays["triangles"]) == len(LUMP.triangles)
    assert not [name for name, *_ in opened if "mtl" in str(name)]


@pytest.mark.parametrize(
    ("content", "name", "reason"),
    [
        (b"", "a.stl", "no triangles|cannot be read"),
        (b"solid nothing\nendsolid nothing\n", "a.stl", "no triangles|cannot be read"),
        (b"ply\nformat ascii 1.0\nelement vertex 1\n", "a.ply", "cannot be read as PLY"),
        (b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 9\n", "a.obj", "cannot be read|not there"),
        (b"v 0 0 nan\nv 1 0 0\nv 0 1 0\nf 1 2 3\n", "a.obj", "cannot be read|not finite"),
        (b"\x80\x04\x95", "a.obj", "no triangles|cannot be read"),
        (b"x", "a.pickle", r"the ending '.pickle' is none of .stl, .obj, .ply"),
        (b"x", "a.npz", "no file of arrays"),
    ],
)
def test_what_is_no_mesh_is_refused(content, name, reason):
    with pytest.raises(ValueError, match=reason):
        mesh_arrays(content, name)


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=300), st.sampled_from([".stl", ".obj", ".ply", ".npz"]))
def test_any_bytes_are_a_mesh_or_refused(content, ending):
    try:
        arrays = mesh_arrays(content, f"a{ending}")
    except ValueError:
        return
    assert arrays["triangles"].shape[1] == 3


def test_python_objects_are_never_loaded():
    out = io.BytesIO()
    np.savez(out, corners=np.array([{"a": 1}], dtype=object), triangles=np.zeros((1, 3), np.int32))
    with pytest.raises(ValueError, match="no file of arrays"):
        mesh_arrays(out.getvalue(), "a.npz")


def without(mesh: Mesh, *gone: int) -> Mesh:
    kept = np.setdiff1d(np.arange(len(mesh.triangles)), gone)
    return Mesh(mesh.corners, mesh.triangles[kept], mesh.piece[kept])


def turned_over(mesh: Mesh, *which: int) -> Mesh:
    triangles = mesh.triangles.copy()
    triangles[list(which)] = triangles[list(which)][:, ::-1]
    return Mesh(mesh.corners, triangles, mesh.piece)


def test_sound_bodies_and_their_parts():
    shell = joined(globe(2, (2.0, 2.0, 2.0)), reversed_mesh(globe(2)))
    core = joined(shell, globe(1, (0.5, 0.5, 0.5)))
    assert check_closed_body(LUMP) == 1
    assert check_closed_body(shell) == 1  # a hollow is no part of its own
    assert check_closed_body(core) == 2
    touching = joined(block((0, 0, 0), (1, 1, 1)), block((1, 0, 0), (2, 1, 1)))
    assert check_closed_body(touching) == 2


@pytest.mark.parametrize(
    ("mesh", "reason"),
    [
        (without(LUMP, 3), "not closed: 3 of its edges belong to one triangle only"),
        (turned_over(LUMP, 5), "not turned alike: at 3 edges two neighbours disagree"),
        (reversed_mesh(LUMP), "counterclockwise seen from outside"),
        (joined(globe(2), globe(2).moved(np.array([0.8, 0.1, 0.0]))), "the surface crosses itself"),
        (joined(globe(2), globe(1, (0.3, 0.3, 0.3))), "lies within another one"),
        (
            joined(globe(2), reversed_mesh(globe(1, (0.3,) * 3)).moved(np.array([4.0, 0, 0]))),
            "turned inside out and lies within no other one",
        ),
    ],
    ids=["hole", "turned", "inside out", "crossing", "nested", "stray hollow"],
)
def test_unsound_surfaces_are_refused_with_the_reason(mesh, reason):
    with pytest.raises(ValueError, match=reason):
        check_closed_body(mesh)


def crossing_by_brute_force(mesh: Mesh) -> bool:
    """Every side against every triangle, by solving for the point where they meet."""
    corner = mesh.corners[mesh.triangles]
    for i, tri in enumerate(mesh.triangles):
        p, q = corner[i], np.roll(corner[i], -1, axis=0)
        for j, other in enumerate(mesh.triangles):
            for k in range(3):
                if {tri[k], tri[(k + 1) % 3]} & set(other.tolist()):
                    continue
                a, b, c = corner[j]
                try:
                    t, u, v = np.linalg.solve(np.stack([p[k] - q[k], b - a, c - a], 1), p[k] - a)
                except np.linalg.LinAlgError:
                    continue
                if 0 < t < 1 and u > 0 and v > 0 and u + v < 1:
                    return True
    return False


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(0.0, 0.9))
def test_crossings_are_those_found_by_brute_force(seed, roughness):
    rng = np.random.default_rng(seed)
    ball = globe(1)
    mesh = Mesh(ball.corners + roughness * rng.normal(size=ball.corners.shape),
                ball.triangles, ball.piece)  # fmt: skip
    assert (first_crossing(mesh) is not None) == crossing_by_brute_force(mesh)


def test_smooth_pieces_meet_at_edges():
    column = mesh_of(prism(6, 1.0))
    flat = Mesh(column.corners, column.triangles, np.zeros_like(column.piece))
    # side faces meet at 60 degrees, sides and ends at 90
    counts = [len(set(with_smooth_pieces(flat, a).piece.tolist())) for a in (30, 59, 61, 91)]
    assert counts == [8, 8, 3, 1]
    np.testing.assert_array_equal(with_smooth_pieces(flat, 30).piece, column.piece)
    assert with_smooth_pieces(LUMP, 30).piece.max() == 0
    assert parts(joined(LUMP, flat)).max() == 1
    assert edges_of(flat.triangles).ends.shape == (3 * len(flat.triangles) // 2, 2)


def test_winding_numbers():
    shell = joined(globe(2, (2.0, 2.0, 2.0)), reversed_mesh(globe(2)))
    for place, expected in (([0, 0, 0], 0.0), ([1.5, 0, 0], 1.0), ([3, 0, 0], 0.0)):
        assert winding(shell, np.array(place, float)) == pytest.approx(expected, abs=1e-12)
