"""Cases that give no result are data: listed with a reason and advice, and taken up again."""

from __future__ import annotations

import json

from campaign_runs import call, config, solved_cases

import scatterloom

COUNT = 4


def test_failed_cases_are_listed_and_taken_up_again(tmp_path):
    path = config(tmp_path, COUNT)
    allowed = path.read_text()
    # A tenth of a GiB holds no case: every one fails before it starts, the campaign goes on.
    path.write_text(allowed.replace("job_seconds: 1.0", "job_seconds: 1.0, memory_gib: 0.1"))
    results = ("--results", tmp_path / "results")
    done = call("run", path, *results, "--cores", 2)
    assert done.returncode == 1, done.stderr
    table = scatterloom.open_table(tmp_path / "results/tiny/table.zarr").load()
    assert (table.status == 3).all()
    assert (table.warning_flags == 128).all()
    assert table.extinction_efficiency.isnull().all()

    told = call("status", path, *results)
    assert f"{COUNT} cases failed by reason 2 (no_memory)" in told.stdout
    assert "raise 'solver.memory_gib'" in told.stdout
    state = json.loads(call("status", path, *results, "--json").stdout)
    assert len(state["cases_failed"]) == COUNT
    assert state["particles"]["plate"]["failed"] == COUNT

    # More memory alone changes nothing: a finished case, failed or not, is not taken up.
    path.write_text(allowed)
    before = solved_cases(tmp_path / "results" / "tiny")
    assert call("run", path, *results, "--cores", 2).returncode == 1
    assert solved_cases(tmp_path / "results" / "tiny") == before

    done = call("run", path, *results, "--cores", 2, "--retry-failed")
    assert done.returncode == 1, done.stderr
    assert f"{COUNT} failed cases are taken up again" in done.stderr
    table = scatterloom.open_table(tmp_path / "results/tiny/table.zarr").load()
    assert (table.status == 2).all()
    state = json.loads(call("status", path, *results, "--json").stdout)
    assert state["cases_failed"] == []
    assert state["particles"] == {
        "plate": {"cases": COUNT, "done": COUNT, "running": 0, "failed": 0, "left": 0}
    }


def test_two_campaigns_share_their_cases(tmp_path):
    path = config(tmp_path, COUNT)
    results = ("--results", tmp_path / "results", "--cores", 2)
    assert call("run", path, *results).returncode == 1
    other = tmp_path / "other.yaml"
    other.write_text(path.read_text().replace("campaign: tiny", "campaign: other"))
    done = call("run", other, *results)
    assert done.returncode == 1, done.stderr
    state = json.loads(call("status", other, *results[:2], "--json").stdout)
    assert state["cases_reused"] == COUNT
    one, two = (
        scatterloom.open_table(tmp_path / f"results/{name}/table.zarr").load()
        for name in ("tiny", "other")
    )
    reused = (two.warning_flags & 256) > 0
    assert reused.all()
    assert (one.scattering_matrix.values == two.scattering_matrix.values).all()
    # Being reused is no warning.
    assert (one.status.values == two.status.values).all()
