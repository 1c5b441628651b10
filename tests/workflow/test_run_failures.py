"""What goes wrong in a run is said in a few lines, with the exit code that it has."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from campaign_runs import call, config

from scatterloom.commands._profile import find_profile
from scatterloom.errors import EnvironmentProblem
from scatterloom.graph import Graph

ROOT = Path(__file__).parents[2]


def test_a_bad_campaign_starts_nothing(tmp_path):
    path = config(tmp_path)
    path.write_text(path.read_text().replace("angles_deg", "angels_deg"))
    done = call("run", path, "--results", tmp_path / "results")
    assert done.returncode == 2
    assert "angels_deg" in done.stderr
    assert "Traceback" not in done.stderr
    assert not (tmp_path / "results").exists()


def test_a_failed_job_is_named_with_its_log_and_its_exit_code(tmp_path):
    campaign = tmp_path / "results" / "tiny"
    # A file where the solver wants a folder: no privilege gets round that.
    (campaign / "state").mkdir(parents=True)
    (campaign / "state" / "cases").write_text("in the way")
    path = config(tmp_path, count=4)
    done = call("run", path, "--results", tmp_path / "results")
    assert done.returncode == 3
    assert "job anchors-spheroid-" in done.stderr
    assert "(solve_anchors) failed" in done.stderr
    log = next(line for line in done.stderr.splitlines() if line.startswith("  log: "))
    assert "state/cases" in Path(log.removeprefix("  log: ")).read_text()
    assert "0 of 4 cases are solved and kept" in done.stderr
    assert "Traceback" not in done.stderr

    state = json.loads(call("status", path, "--results", tmp_path / "results", "--json").stdout)
    assert state["cases_left"] == 4
    assert [job["exit_code"] for job in state["failed"]] == [3]
    text = call("status", path, "--results", tmp_path / "results")
    assert text.returncode == 0
    assert "failed: anchors-spheroid-" in text.stdout

    (campaign / "state" / "cases").unlink()
    again = call("run", path, "--results", tmp_path / "results")
    assert again.returncode == 1, again.stderr  # coarse lattices, as everywhere here
    state = json.loads(call("status", path, "--results", tmp_path / "results", "--json").stdout)
    assert (state["cases_left"], state["failed"], state["table_gathered"]) == (0, [], True)

    damage_is_found_and_mended(path, tmp_path)


def damage_is_found_and_mended(path: Path, tmp_path: Path) -> None:
    """Part of the test above, which has a finished campaign at hand."""
    campaign = tmp_path / "results" / "tiny"
    results = ("--results", tmp_path / "results")
    intact = call("verify", path, *results)
    assert intact.returncode == 0
    assert "intact" in intact.stdout
    (chunk,) = (p for p in (campaign / "table.zarr/residual/c").rglob("*") if p.is_file())
    content = bytearray(chunk.read_bytes())
    content[-1] ^= 1
    chunk.write_bytes(content)
    altered = call("verify", campaign / "table.zarr")
    assert altered.returncode == 4
    assert str(chunk) in altered.stderr
    chunk.unlink()
    assert call("verify", path, *results).returncode == 4
    # A lost file is noticed before the next run, which then gathers the table again.
    Graph.open(path, results[1]).prepare()
    assert not (campaign / "table.json").exists()
    assert call("gather", path, *results).returncode == 0
    assert call("verify", path, *results).returncode == 0
    Graph.open(path, results[1]).prepare()
    assert (campaign / "table.json").exists()

    # A damaged case file stops the gathering and is named; the table stays.
    case_file = next(campaign.glob("cases/*.cases"))
    case_file.write_bytes(case_file.read_bytes()[:-1])
    stopped = call("gather", path, *results)
    assert stopped.returncode == 4
    assert f"{case_file}: cut short" in stopped.stderr
    assert call("verify", path, *results).returncode == 0
    case_file.unlink()
    partial = call("gather", path, *results, "--partial")
    assert partial.returncode == 1
    assert " missing" in partial.stdout


def test_the_cluster_profile_says_what_it_needs(tmp_path, monkeypatch):
    monkeypatch.setenv("PATH", str(tmp_path))  # no sbatch there
    with pytest.raises(EnvironmentProblem, match="no program sbatch"):
        find_profile("slurm", ROOT / "workflow" / "profiles")
    monkeypatch.setattr("importlib.util.find_spec", lambda name: None)
    with pytest.raises(EnvironmentProblem, match="snakemake-executor-plugin-slurm"):
        find_profile("slurm", ROOT / "workflow" / "profiles")


def test_an_unknown_profile_starts_nothing(tmp_path):
    results = tmp_path / "results"
    done = call("run", config(tmp_path), "--results", results, "--profile", "slrum")
    assert done.returncode == 2
    assert "no profile 'slrum'" in done.stderr
    assert not results.exists()


@pytest.mark.parametrize("cores", ["0", "-1", "many"])
def test_a_senseless_number_of_cores_is_refused(tmp_path, cores):
    done = call("run", config(tmp_path), f"--cores={cores}")
    assert done.returncode == 2
    assert "--cores" in done.stderr
