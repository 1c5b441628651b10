"""Sheets of particles: what they state is what is solved."""

import math

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from campaign.bad_configs import edited
from scatterloom.cli import main
from scatterloom.figures.bodies import COLOURS, Body, sheet, sheets
from scatterloom.figures.picture import style
from scatterloom.graph import Graph
from scatterloom.preview import bodies_of

CUBE = {"kind": "cuboid", "edges": [1.0, 1.0, 1.0]}
LAYERED = {"kind": "layered", "host": CUBE, "scales": [0.5]}


def test_a_sheet_tells_the_truth():
    bodies = [
        Body("block", CUBE, ("stone",), 12, (0.1, 0.2)),
        Body("shell", LAYERED, ("ice", "stone"), 12, (0.1, 0.1)),
    ]
    with style():
        picture = sheet(bodies)
        picture.figure.canvas.draw()
    block, shell = (dict(zip(picture.header, row, strict=True)) for row in picture.rows)
    assert block["cells"] == 12**3 and block["cells across"] == 12
    # the sphere with the surface of a cube of the volume of the unit sphere
    edge = (4 * math.pi / 3) ** (1 / 3)
    ratio = block["surface-equivalent over volume-equivalent radius"]
    assert ratio == pytest.approx(math.sqrt(6 * edge**2 / (4 * math.pi)), rel=1e-12)
    reach = block["circumscribed over volume-equivalent radius"]
    assert reach == pytest.approx(edge * math.sqrt(3) / 2, rel=1e-12)
    assert shell["volume fractions"] == "0.875 0.125" and shell["materials"] == "ice stone"
    image = picture.figure.axes[4].images[0].get_array()
    np.testing.assert_allclose(image[6, 6], to_rgb(COLOURS[1]), atol=1e-9)
    np.testing.assert_allclose(image[1, 6], to_rgb(COLOURS[0]), atol=1e-9)
    texts = [text.get_text() for text in picture.figure.axes[2].texts]
    assert "block" in texts and any("12 cells across, 1728 in all" in text for text in texts)
    assert len(sheets(bodies * 4)) == 2


def test_preview_draws_the_particles_of_a_campaign(tmp_path, capsys):
    config = tmp_path / "campaign.yaml"
    config.write_text(edited("{kind: sphere}", "{kind: cylinder, length_to_diameter: 1.5}"))
    graph = Graph.open(config, tmp_path / "results")
    plate, rod = bodies_of(graph)
    assert (plate.name, rod.name) == ("plate", "ball")
    assert rod.spec == {"kind": "cylinder", "length_to_diameter": 1.5}
    assert rod.cells_across == max(
        job.levels[-1] for job in graph.jobs.values() if job.shape["kind"] == "cylinder"
    )
    assert main(["preview", str(config), "--output", str(tmp_path / "out")]) == 0
    assert capsys.readouterr().out.strip().endswith("particles-1.png")
    names = {path.name for path in (tmp_path / "out").iterdir()}
    assert names == {f"particles-1.{ending}" for ending in ("png", "svg", "pdf", "csv")}
