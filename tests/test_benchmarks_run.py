"""The benchmarks run: a short way of some, which says nothing about speed."""

import json
import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]


def test_short_benchmarks_write_their_pages(tmp_path):
    paths = [ROOT / "scripts", ROOT / "workflow", ROOT / "tests"]
    environment = os.environ | {"PYTHONPATH": os.pathsep.join(map(str, paths))}
    words = [sys.executable, "-m", "benchmarks", "--short", "--output", str(tmp_path)]
    done = subprocess.run(words, env=environment, capture_output=True, text=True, timeout=300)
    assert done.returncode == 0, done.stderr
    product = json.loads((tmp_path / "product.json").read_text())
    assert [row["cells"] for row in product["rows"]] == [24]
    assert product["rows"][0]["textbook / ours, packed"] > 0.0
    scaling = json.loads((tmp_path / "scaling.json").read_text())
    assert [row["cells across"] for row in scaling["rows"]] == [16, 24]
    for name in ("product", "scaling"):
        assert (tmp_path / f"{name}.png").read_bytes().startswith(b"\x89PNG")
        assert "| cells" in (tmp_path / f"{name}.md").read_text()


def test_short_ways_never_replace_published_figures():
    words = [sys.executable, "-m", "benchmarks", "--short"]
    environment = os.environ | {"PYTHONPATH": f"{ROOT / 'scripts'}{os.pathsep}{ROOT / 'tests'}"}
    done = subprocess.run(words, env=environment, capture_output=True, text=True, timeout=120)
    assert done.returncode == 2
    assert "an --output of its own" in done.stderr
