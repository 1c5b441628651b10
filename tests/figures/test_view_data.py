"""Numbers of the interactive view: packed, thinned, safe inside a page."""

import base64
import json

import numpy as np
import pytest

from oracles.tables import mie_table
from scatterloom.figures import view
from scatterloom.figures.view import embedded, view_data


@pytest.fixture(scope="module")
def table():
    return mie_table(
        radius_um=np.geomspace(0.05, 0.3, 9),
        angles_deg=np.arange(0.0, 181.0, 5.0),
        indices={"dark": 1.55 + 0.05j},
    )


def unpacked(data, name, *shape):
    return np.frombuffer(base64.b64decode(data[name]), dtype="<f4").reshape(shape)


def test_nothing_is_left_out_of_a_small_table(table):
    data = view_data(table)
    assert data["note"] == ""
    assert data["elements"] == ["11", "12", "22", "33", "34", "44"]
    matrix = unpacked(data, "matrix", 1, 2, 9, 6, 37)
    f = table.scattering_matrix.values
    np.testing.assert_allclose(matrix[..., 0, :], f[..., 0, 0], rtol=1e-6)
    np.testing.assert_allclose(matrix[..., 4, :], f[..., 2, 3] / f[..., 0, 0], atol=1e-6)


def test_large_tables_are_thinned_and_say_so(table, monkeypatch):
    monkeypatch.setattr(view, "LARGEST_NUMBERS", 4 * 2 * 6 * 2 * 37)
    data = view_data(table)
    assert data["note"].startswith("Thinned for this page: 4 of 9 sizes and 37 of 37 angles")
    kept = np.array(data["radius_um"][0])
    assert kept[0] == table.radius_um.values[0, 0] and kept[-1] == table.radius_um.values[0, -1]
    monkeypatch.setattr(view, "LARGEST_NUMBERS", 2 * 2 * 6 * 2 * 15)
    data = view_data(table)
    assert "3 of 9 sizes and 10 of 37 angles" in data["note"]
    assert data["angles_deg"][0] == 0.0 and data["angles_deg"][-1] == 180.0
    assert unpacked(data, "matrix", 1, 2, 3, 6, 10).shape[-1] == 10


def test_names_cannot_leave_their_place(table):
    text = embedded({"particles": ["</script><b>&amp;"]})
    assert "<" not in text and ">" not in text and "&" not in text
    assert json.loads(text) == {"particles": ["</script><b>&amp;"]}
