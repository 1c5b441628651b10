"""Shapes from files in a campaign: content counts, not the file; it is kept; faults are named."""

import json
import shutil

import numpy as np
import pytest
import trimesh

from campaign.bad_configs import edited
from scatterloom import jobs
from scatterloom.campaign import load
from scatterloom.campaign.expand import expand
from scatterloom.campaign.geometry import extents
from scatterloom.cli import main
from scatterloom.crate import pack
from scatterloom.errors import BadInput, IntegrityError
from scatterloom.graph import Graph
from scatterloom.particle.shapes import from_spec
from scatterloom.solids import kept, registry
from scatterloom.solids.mesh import Mesh
from scatterloom.unpacking import unpack
from solid_kit import block, globe, joined, reversed_mesh

PLATE = "{kind: spheroid, equatorial_to_polar: 2.0}"
SMALL = ("radius_um: {from: 0.1, to: 1.0, ratio: 1.2}", "size_parameter: [0.3]")


def save(path, mesh: Mesh) -> None:
    trimesh.Trimesh(mesh.corners, mesh.triangles, process=False).export(path)


@pytest.fixture
def campaign_of(tmp_path):
    def make(shape: str, *more: str):
        path = tmp_path / "campaign.yaml"
        path.write_text(edited(PLATE, shape, *SMALL, *more))
        return path

    save(tmp_path / "grain.stl", globe(2, (1.5, 1.0, 0.7)))
    return make


def digests(path) -> list[str]:
    return [case.digest for case in expand(load(path)).cases]


def test_the_content_counts_and_nothing_else(campaign_of, tmp_path):
    path = campaign_of("{kind: mesh, file: grain.stl}")
    campaign = load(path)
    assert not [w for w in campaign.warnings if "grain" in str(w)]
    (content,) = campaign.contents
    before = digests(path)
    spec = expand(campaign).cases[0].shape
    assert spec == {"kind": "mesh", "content": content, "edge_angle_deg": 30.0}
    # the same mesh under another name, in another format of the same precision
    (tmp_path / "deeper").mkdir()
    shutil.copy(tmp_path / "grain.stl", tmp_path / "deeper" / "other.STL")
    assert digests(campaign_of("{kind: mesh, file: deeper/other.STL}")) == before
    # stated, and right
    assert digests(campaign_of(f"{{kind: mesh, file: grain.stl, content: {content}}}")) == before
    # another angle between smooth pieces is another case; so is another mesh
    other = digests(campaign_of("{kind: mesh, file: grain.stl, edge_angle_deg: 20}"))
    assert not set(other[:1]) & set(before)
    save(tmp_path / "grain.stl", globe(2, (1.5, 1.0, 0.8)))
    changed = digests(campaign_of("{kind: mesh, file: grain.stl}"))
    assert changed[0] != before[0] and changed[-1] == before[-1]
    with pytest.raises(BadInput, match="does not hold what `content` states"):
        load(campaign_of(f"{{kind: mesh, file: grain.stl, content: {content}}}"))


def test_size_and_place_of_the_mesh_are_of_no_account(campaign_of, tmp_path):
    spec = expand(load(campaign_of("{kind: mesh, file: grain.stl}"))).cases[0].shape
    save(tmp_path / "grain.stl", globe(2, (1.5, 1.0, 0.7)).moved(np.array([7.0, 8, 9]), 1e4))
    far = expand(load(campaign_of("{kind: mesh, file: grain.stl}"))).cases[0].shape
    # STL holds single precision: seven digits of coordinates eleven times the extent
    assert extents(far).half == pytest.approx(extents(spec).half, rel=3e-6)


def test_kept_with_the_results_and_read_from_there(campaign_of, tmp_path, monkeypatch):
    path = campaign_of("{kind: mesh, file: grain.stl}")
    graph = Graph.open(path, tmp_path / "results")
    graph.prepare()
    layout = graph.layout
    (content,) = graph.campaign.contents
    kept_file = layout.solids / kept.file_name(content)
    assert kept_file.is_file()
    (tmp_path / "grain.stl").unlink()
    with pytest.raises(BadInput, match="is no file"):
        load(path)
    # the kept campaign stands alone, and has the same cases
    assert digests(layout.config) == [case.digest for case in graph.grid.cases]
    assert load(layout.config).merged_yaml().count(content) == 2
    # a job in a process of its own finds the mesh by what it holds
    monkeypatch.setattr(kept, "_remembered", {})
    monkeypatch.setattr(kept, "_folders", [])
    registry._build.cache_clear()
    (name,) = [n for n, job in graph.jobs.items() if job.shape["kind"] == "mesh"]
    with pytest.raises(IntegrityError, match="is nowhere"):
        jobs.task_of(graph.specs[name])
    jobs.solve(json.loads(layout.job_file(name).read_text()), layout.folder)
    assert layout.case_file(name).is_file()
    # and never takes a damaged one for it
    damaged = kept.packed({**kept.recall(content), "corners": np.zeros((1, 3))})
    for bad in (kept_file.read_bytes()[:-30], damaged):
        kept_file.write_bytes(bad)
        monkeypatch.setattr(kept, "_remembered", {})
        with pytest.raises(IntegrityError, match=r"not as it was written|not that of its name"):
            from_spec(graph.specs[name]["shape"] | {"edge_angle_deg": 31.0})


def test_packed_and_unpacked(campaign_of, tmp_path):
    path = campaign_of("{kind: mesh, file: grain.stl}")
    graph = Graph.open(path, tmp_path / "results")
    pack(graph.campaign, graph.layout, tmp_path / "all.zip", with_table=False)
    unpack(tmp_path / "all.zip", tmp_path / "elsewhere")
    assert digests(tmp_path / "elsewhere" / "merged.yaml") == digests(path)


LUMP = globe(2)
FAULTS = {
    "hole": (Mesh(LUMP.corners, LUMP.triangles[1:], LUMP.piece[1:]),
             "'grain.stl': the surface is not closed: 3 of its edges belong to one triangle only"),
    "crossing": (joined(LUMP, LUMP.moved(np.array([0.8, 0.1, 0.05]))),
                 "'grain.stl': the surface crosses itself: triangle"),
    "inside out": (reversed_mesh(LUMP), "corners must run counterclockwise seen from outside"),
    "needle": (block((0, 0, 0), (11, 1, 1)), "11 times as long as it is thick"),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTS)
def test_faults_of_meshes_are_told_in_one_message(name, campaign_of, tmp_path, capsys):
    mesh, message = FAULTS[name]
    save(tmp_path / "grain.stl", mesh)
    path = campaign_of("{kind: mesh, file: grain.stl}")
    assert main(["check", str(path)]) == 2
    told = capsys.readouterr().err
    assert "campaign.yaml:11:31: 'grain.stl': " in told and message in told
    assert "  found: 'grain.stl' (text)" in told and "  hint: " in told
    assert told.endswith("1 problem; nothing was started\n")


def test_separate_parts_are_flagged(campaign_of, tmp_path):
    apart = joined(globe(1), globe(1).moved(np.array([3.0, 0.0, 0.0])))
    save(tmp_path / "grain.stl", apart)
    warning = load(campaign_of("{kind: mesh, file: grain.stl}")).warnings[0]
    assert "is 2 separate parts" in str(warning) and "as one particle" in str(warning)


def voxels() -> np.ndarray:
    labels = np.zeros((6, 5, 5), dtype=np.uint8)
    labels[1:5, 1:4, 1:4] = 1
    labels[3:5, 1:3, 1:3] = 2
    return labels


def test_label_volumes(campaign_of, tmp_path):
    np.save(tmp_path / "a.npy", voxels())
    path = campaign_of("{kind: voxels, file: a.npy, more_materials: [salt]}")
    campaign = load(path)
    case = expand(campaign).cases[0]
    assert case.shape == {"kind": "voxels", "content": campaign.contents[0]}
    assert case.indices == (1.53 + 0.003j, 1.5 + 0j)
    # medium around is of no account, another order of the labels is
    np.save(tmp_path / "a.npy", np.pad(voxels(), 3).astype(np.int64))
    assert digests(path)[0] == case.digest
    np.save(tmp_path / "a.npy", np.array([0, 2, 1], dtype=np.uint8)[voxels()])
    assert digests(path)[0] != case.digest
    graph = Graph.open(path, tmp_path / "results")
    graph.prepare()
    assert digests(graph.layout.config) == digests(path)


@pytest.mark.parametrize(
    ("shape", "line"),
    [
        ("{kind: voxels, file: a.npy}",
         "11:33: 'a.npy': labels run up to 2, but 1 materials are named"),
        ("{kind: voxels, file: a.npy, more_materials: [sand]}",
         "11:57: material 'sand' is not defined under materials"),
        ("{kind: voxels, file: b.npy}", "11:33: the shape's file 'b.npy' is no file"),
        ("{kind: voxels, file: grain.stl}",
         "11:33: 'grain.stl': the ending '.stl' is none of .npy, .nc, .zarr"),
        ("{kind: voxels, file: .}", "11:33: the shape's file '.' is a folder"),
        ("{kind: voxels, file: a.npy, more_materials: [salt]}\n"
         "    coating: {material: salt, core_radius_fraction: 0.5}",
         "12:14: the body of 'plate' cannot be made: only a body of one material"),
    ],
)  # fmt: skip
def test_faults_of_label_volumes(shape, line, campaign_of, tmp_path, capsys):
    np.save(tmp_path / "a.npy", voxels())
    assert main(["check", str(campaign_of(shape))]) == 2
    told = capsys.readouterr().err
    assert f"campaign.yaml:{line}" in told and "  hint: " in told
