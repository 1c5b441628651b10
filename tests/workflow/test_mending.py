"""Damaged results of a finished campaign: each is named, and only what is lost is solved again."""

from __future__ import annotations

import json
import shutil

import pytest
from campaign_runs import call, config, solved_cases

import scatterloom
from scatterloom.errors import IntegrityError

COUNT = 12


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    folder = tmp_path_factory.mktemp("finished")
    done = call("run", config(folder, COUNT), "--results", folder / "results", "--cores", 2)
    assert done.returncode == 1, done.stderr
    return folder


@pytest.fixture
def campaign(finished, tmp_path):
    shutil.copytree(finished, tmp_path / "copy", symlinks=True)
    return tmp_path / "copy" / "results" / "tiny"


def run(campaign, *more):
    top = campaign.parents[1]
    return call("run", top / "tiny.yaml", "--results", top / "results", *more)


def flip(path, position=-5):
    content = bytearray(path.read_bytes())
    content[position] ^= 1
    path.write_bytes(content)


def published(campaign, job="*"):
    return sorted(campaign.glob(f"cases/{job}.cases"))


def same_table(campaign, finished):
    one = scatterloom.open_table(campaign / "table.zarr")
    two = scatterloom.open_table(finished / "results" / "tiny" / "table.zarr")
    return one.attrs["content_digest"] == two.attrs["content_digest"]


def test_a_cut_case_file_is_noticed_by_every_run(campaign, finished):
    before = solved_cases(campaign)
    victim = published(campaign)[0]
    victim.write_bytes(victim.read_bytes()[:-7])
    done = run(campaign)
    assert done.returncode == 1, done.stderr
    assert f"{victim}: cut short" in done.stderr
    assert solved_cases(campaign) == before  # the single cases were whole: nothing is solved
    assert same_table(campaign, finished)
    assert (campaign / "state" / "damaged" / victim.name).exists()
    assert victim.exists()


def test_a_flipped_bit_met_by_the_gathering_is_mended_in_the_same_run(campaign, finished):
    before = solved_cases(campaign)
    victim = published(campaign)[0]
    flip(victim)
    (campaign / "table.json").unlink()  # so that the table is gathered again
    done = run(campaign)
    assert done.returncode == 1, done.stderr
    assert f"{victim}: altered" in done.stderr
    assert solved_cases(campaign) == before
    assert same_table(campaign, finished)


def test_only_the_lost_case_is_solved_again(campaign, monkeypatch):
    # Without the library, which has another copy of it.
    monkeypatch.setenv("SCATTERLOOM_CASE_REUSE", "off")
    before = solved_cases(campaign)
    victim = published(campaign, "span*")[0]
    spec = json.loads((campaign / f"jobs/{victim.stem}.json").read_bytes())
    digest = spec["cases"][0][0]
    lost = campaign / "state" / "cases" / digest[:2] / f"{digest}.case"
    flip(victim)
    flip(lost)
    done = run(campaign, "--verify")
    assert done.returncode == 1, done.stderr
    assert f"{victim}: altered" in done.stderr
    after = solved_cases(campaign)
    assert {digest for digest in after if after[digest] != before[digest]} == {lost.stem}


def test_a_flipped_bit_in_a_chunk_of_the_table_is_mended(campaign, finished):
    before = solved_cases(campaign)
    chunk = next(p for p in (campaign / "table.zarr/scattering_matrix/c").rglob("*") if p.is_file())
    flip(chunk)
    with pytest.raises(IntegrityError):
        scatterloom.open_table(campaign / "table.zarr")
    done = run(campaign, "--verify")
    assert done.returncode == 1, done.stderr
    assert f"{chunk}: altered" in done.stderr
    assert solved_cases(campaign) == before
    assert same_table(campaign, finished)


def test_an_outline_that_was_altered_is_made_again(campaign):
    outline = campaign / "state" / "plan.json"
    content = json.loads(outline.read_bytes())
    first = next(iter(content["jobs"]))
    content["jobs"][first]["cases"] += 1
    outline.write_text(json.dumps(content))
    top = campaign.parents[1]
    told = call("status", top / "tiny.yaml", "--results", top / "results", "--json")
    assert json.loads(told.stdout)["cases"] == COUNT
