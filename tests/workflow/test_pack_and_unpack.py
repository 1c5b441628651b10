"""A campaign in one file: complete, reproducible elsewhere, and harmless to whoever opens it."""

from __future__ import annotations

import hashlib
import json
import shutil
import stat
import zipfile
from pathlib import Path

import pytest
from campaign_runs import call, config

from scatterloom.errors import BadInput, IntegrityError
from scatterloom.unpacking import unpack

COUNT = 6
CSV = "wavelength_um,n,k\n0.4,1.5,0.01\n2.0,1.5,0.01\n"
SIZES = "radius_um,density\n0.05,1\n0.2,2\n"
POPULATION = """\
populations:
  - {name: haze, particles: {plate: 1.0}, size: {kind: tabulated, table: sizes.csv}}
"""


@pytest.fixture(scope="module")
def packed(tmp_path_factory):
    folder = tmp_path_factory.mktemp("packed")
    path = config(folder, COUNT)
    (folder / "silt.csv").write_text(CSV)
    (folder / "sizes.csv").write_text(SIZES)
    text = path.read_text().replace("{n: 1.5, k: 0.01}", "{table: silt.csv}")
    path.write_text(text + POPULATION)
    results = folder / "results"
    done = call("run", path, "--results", results, "--cores", 2)
    assert done.returncode == 1, done.stderr
    target = folder / "tiny.crate.zip"
    done = call("pack", path, "--results", results, "--output", target)
    assert done.returncode == 0, done.stderr
    return target


def names(path):
    with zipfile.ZipFile(path) as archive:
        return set(archive.namelist())


def test_everything_that_matters_is_packed(packed):
    found = names(packed)
    assert found >= {
        "campaign.yaml",
        "merged.yaml",
        "materials/silt.csv",
        "sizes/1-sizes.csv",
        "requirements.lock",
        "code.json",
        "audit.json",
        "report.html",
        "Snakefile",
        "workflow/rules/solve.smk",
        "ro-crate-metadata.json",
        "manifest.json",
        "table.zarr/commit.json",
    }
    with zipfile.ZipFile(packed) as archive:
        assert archive.read("materials/silt.csv").decode() == CSV
        assert archive.read("sizes/1-sizes.csv").decode() == SIZES
        code = json.loads(archive.read("code.json"))
        graph = json.loads(archive.read("ro-crate-metadata.json"))["@graph"]
    assert code["version"]
    entities = {entity["@id"]: entity for entity in graph}
    assert len(entities) == len(graph)
    # Every file is described, and everything that is referred to is there.
    assert (
        found
        - {"ro-crate-metadata.json"}
        - {name for name in found if name.startswith("table.zarr/")}
        <= entities.keys()
    )
    for entity in graph:
        for key, value in entity.items():
            for part in value if isinstance(value, list) else [value]:
                if isinstance(part, dict) and not part["@id"].startswith("http"):
                    assert part["@id"] in entities, (entity["@id"], key)
    assert "ComputationalWorkflow" in entities["Snakefile"]["@type"]
    assert entities["#run"]["result"][0] == {"@id": "table.zarr/"}


def test_the_same_campaign_packs_to_the_same_files(packed):
    again = packed.with_name("again.zip")
    folder = packed.parent
    done = call("pack", folder / "tiny.yaml", "--results", folder / "results", "--output", again)
    assert done.returncode == 0, done.stderr
    with zipfile.ZipFile(packed) as one, zipfile.ZipFile(again) as two:
        for name in one.namelist():
            if name not in ("ro-crate-metadata.json", "manifest.json"):  # these are dated
                assert one.read(name) == two.read(name), name


def test_it_is_reproduced_elsewhere(packed, tmp_path):
    folder = tmp_path / "elsewhere"
    done = call("unpack", packed, folder, "--run", "--cores", 2)
    assert done.returncode == 1, done.stderr  # flagged cases, as in the original
    assert "agrees with" in done.stdout
    assert (folder / "results" / "tiny" / "report.html").exists()


def test_a_table_that_is_not_reproduced_is_said(packed, tmp_path):
    from scatterloom.resolve import same_tables

    table = packed.parent / "results" / "tiny" / "table.zarr"
    assert same_tables(table, table) == (0, 0.0)


def test_a_sample_is_solved_again(packed):
    path = packed.parent / "tiny.yaml"
    done = call("verify", path, "--results", packed.parent / "results", "--sample", 3)
    assert done.returncode == 0, done.stderr + done.stdout
    assert "3 of 3 cells agree within their error bars" in done.stdout
    assert call("verify", packed.parent / "results", "--sample", 1).returncode == 2


def test_without_the_table_it_is_small(packed, tmp_path):
    target = tmp_path / "small.zip"
    done = call(
        "pack", packed.parent / "tiny.yaml", "--results", packed.parent / "results",
        "--output", target, "--without-table",
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert not any(name.startswith("table.zarr") for name in names(target))
    unpack(target, tmp_path / "there")


def test_an_altered_table_is_not_packed(packed, tmp_path):
    shutil.copytree(packed.parent / "results", tmp_path / "results")
    chunk = next(
        p for p in (tmp_path / "results/tiny/table.zarr/residual/c").rglob("*") if p.is_file()
    )
    chunk.write_bytes(chunk.read_bytes()[:-1])
    target = tmp_path / "x.zip"
    done = call(
        "pack", packed.parent / "tiny.yaml", "--results", tmp_path / "results", "--output", target
    )
    assert done.returncode == 4
    assert str(chunk) in done.stderr
    assert not target.exists()


# What an archive from a stranger may hold.


def manifest_of(files):
    listed = {
        name: {"bytes": len(content), "sha256": hashlib.sha256(content).hexdigest()}
        for name, content in files.items()
    }
    return json.dumps({"format_version": 1, "files": listed}).encode()


GOOD = {"merged.yaml": b"a: 1\n", "ro-crate-metadata.json": b"{}"}


def archive_of(path: Path, files, extra=(), manifest=None):
    """Write an archive; `extra` holds (ZipInfo or name, content) beside the listed files."""
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in files.items():
            archive.writestr(name, content)
        for entry, content in extra:
            archive.writestr(entry, content)
        archive.writestr("manifest.json", manifest_of(files) if manifest is None else manifest)
    return path


def link(name, target):
    entry = zipfile.ZipInfo(name)
    entry.external_attr = (stat.S_IFLNK | 0o777) << 16
    return entry, target


def snapshot(folder):
    return sorted(str(p.relative_to(folder)) for p in folder.rglob("*"))


@pytest.mark.parametrize(
    "name",
    [
        "../evil", "a/../../evil", "/etc/evil", "a//b", "./a", "a\\..\\b", "C:/evil", "C:evil",
        "a/.", "..", ".hidden", "a/.ssh/key", "con", "a/NUL.txt", "a\nb", "a b", "\u202eevil",
        "a" * 600, "/".join("a" * 20), "folder/", "~/evil", "$HOME/evil", "-rf",
    ],
)  # fmt: skip
def test_names_that_escape_are_refused(tmp_path, name):
    path = archive_of(tmp_path / "x.zip", GOOD | {name: b"evil"})
    with pytest.raises(BadInput, match=r"x\.zip"):
        unpack(path, tmp_path / "in" / "side")
    assert snapshot(tmp_path) == ["x.zip"]


@pytest.mark.parametrize("inner", ["a.zip", "a.tar.gz", "b/c.7z", "D.ZIP"])
def test_archives_within_are_refused(tmp_path, inner):
    path = archive_of(tmp_path / "x.zip", GOOD | {inner: b"PK"})
    with pytest.raises(BadInput, match="archive within"):
        unpack(path, tmp_path / "out")


def test_links_and_devices_are_refused(tmp_path):
    for kind in (stat.S_IFLNK, stat.S_IFIFO, stat.S_IFCHR, stat.S_IFDIR):
        entry, content = link("innocent", "/etc/passwd")
        entry.external_attr = (kind | 0o777) << 16
        path = archive_of(tmp_path / "x.zip", GOOD, [(entry, content)])
        with pytest.raises(BadInput, match="link or a device"):
            unpack(path, tmp_path / "out")
    assert snapshot(tmp_path) == ["x.zip"]


def test_bombs_are_refused(tmp_path):
    path = archive_of(tmp_path / "x.zip", GOOD | {"zeros": bytes(50_000_000)})
    with pytest.raises(BadInput, match="compressed more than 200 times"):
        unpack(path, tmp_path / "out")
    path = archive_of(tmp_path / "y.zip", GOOD | {"large": bytes(range(256)) * 9000})
    with pytest.raises(BadInput, match="allow more with --most-gib"):
        unpack(path, tmp_path / "out", most_gib=1e-3)
    assert not (tmp_path / "out").exists()


def test_a_length_that_lies_is_noticed(tmp_path):
    path = archive_of(tmp_path / "x.zip", GOOD | {"large": b"0123456789" * 40})
    content = bytearray(path.read_bytes())
    at = content.index(b"large", content.index(b"PK\x01\x02"))
    # The uncompressed size in the central directory stands 22 bytes before the name.
    content[at - 22 : at - 18] = (17).to_bytes(4, "little")
    path.write_bytes(content)
    with pytest.raises((IntegrityError, BadInput)):
        unpack(path, tmp_path / "out")
    assert snapshot(tmp_path) == ["x.zip"]


def test_names_that_two_systems_read_alike_are_refused(tmp_path):
    path = archive_of(tmp_path / "x.zip", GOOD | {"A": b"1", "a": b"2"})
    with pytest.raises(BadInput, match="comes twice"):
        unpack(path, tmp_path / "out")
    path = archive_of(tmp_path / "y.zip", GOOD | {"a": b"1", "a/b": b"2"})
    with pytest.raises(BadInput, match="both a file and a folder"):
        unpack(path, tmp_path / "out")


def test_the_manifest_must_list_just_what_is_there(tmp_path):
    path = archive_of(tmp_path / "x.zip", GOOD, [("more", b"1")])
    with pytest.raises(IntegrityError, match="'more' is in the manifest or the archive"):
        unpack(path, tmp_path / "out")
    missing = manifest_of(GOOD | {"less": b"1"})
    path = archive_of(tmp_path / "y.zip", GOOD, manifest=missing)
    with pytest.raises(IntegrityError, match="'less'"):
        unpack(path, tmp_path / "out")
    wrong = manifest_of(GOOD | {"merged.yaml": b"a: 2\n"})
    path = archive_of(tmp_path / "z.zip", GOOD, manifest=wrong)
    with pytest.raises(IntegrityError, match=r"merged\.yaml: not as the manifest says"):
        unpack(path, tmp_path / "out")
    for text in (b"[]", b"{}", b"{", b"\xff", b'{"files": 1}', b"[" * 3000):
        path = archive_of(tmp_path / "w.zip", GOOD, manifest=text)
        with pytest.raises(IntegrityError, match="manifest"):
            unpack(path, tmp_path / "out")
    assert not (tmp_path / "out").exists()


def test_an_existing_folder_is_left_alone(tmp_path):
    path = archive_of(tmp_path / "x.zip", GOOD)
    (tmp_path / "out").mkdir()
    with pytest.raises(BadInput, match="is there already"):
        unpack(path, tmp_path / "out")
    (tmp_path / "way").symlink_to(tmp_path / "nowhere")
    with pytest.raises(BadInput, match="is there already"):
        unpack(path, tmp_path / "way")
    assert unpack(path, tmp_path / "new") == 3


def test_no_changed_bit_passes(packed, tmp_path):
    small = archive_of(tmp_path / "x.zip", GOOD | {"data": bytes(range(256))})
    content = small.read_bytes()
    refused = 0
    for position in range(len(content)):
        damaged = bytearray(content)
        damaged[position] ^= 1 << position % 8
        path = tmp_path / "damaged.zip"
        path.write_bytes(damaged)
        try:
            unpack(path, tmp_path / "out")
        except (BadInput, IntegrityError) as error:
            assert "damaged.zip" in str(error)
            refused += 1
        else:
            # Dates, hints on compression and the like: the files are the same.
            assert (tmp_path / "out/data").read_bytes() == bytes(range(256))
            assert (tmp_path / "out/merged.yaml").read_bytes() == GOOD["merged.yaml"]
            shutil.rmtree(tmp_path / "out")
        assert not list(tmp_path.glob("*.partial"))
    assert refused > 0.7 * len(content)
    for length in range(0, len(content), 11):
        path.write_bytes(content[:length])
        with pytest.raises((BadInput, IntegrityError)):
            unpack(path, tmp_path / "out")
