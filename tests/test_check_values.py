"""The oracles against tabulated values; sources in tests/check_values/README.md and each row."""

import csv
from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest

from oracles.axial import random_orientation
from oracles.mie import sphere
from oracles.spheroid import spheroid

FOLDER = Path(__file__).parent / "check_values"


def rows(name):
    with (FOLDER / name).open(newline="") as file:
        return list(csv.DictReader(file))


@pytest.mark.parametrize(
    "row", rows("spheres.csv"), ids=lambda r: f"{r['m']}-{r['size_parameter']}"
)
def test_sphere(row):
    # The tables give 12 digits; double precision loses three or four of them in
    # the alternating sum for backscattering at x = 1e4.
    x = float(row["size_parameter"])
    ball = sphere(complex(row["m"]), x)
    assert ball.extinction_efficiency == pytest.approx(float(row["Qext"]), rel=2e-11, abs=0)
    assert ball.scattering_efficiency == pytest.approx(float(row["Qsca"]), rel=2e-11, abs=0)
    assert ball.absorption_efficiency == pytest.approx(
        float(row["Qabs"]), rel=1e-9, abs=1e-12 * ball.extinction_efficiency
    )
    assert ball.asymmetry_parameter == pytest.approx(float(row["g"]), rel=2e-11, abs=0)
    back = pytest.approx(float(row["Qback"]), rel=max(2e-11, 1e-11 * x), abs=0)
    assert ball.backscattering_efficiency == back


@lru_cache(maxsize=16)
def spheroid_average(ratio, index, x):
    return random_orientation(spheroid(float(ratio), complex(index.replace("i", "j")), float(x)))


def key(row):
    return row["equatorial_to_polar"], row["m"], row["x_equal_volume"]


@pytest.mark.parametrize("row", rows("spheroids.csv"), ids=lambda r: "-".join(key(r)))
def test_spheroid(row):
    # ten digits, and a truncation error of theirs and ours of up to 1e-9 each
    average = spheroid_average(*key(row))
    assert average.extinction_efficiency == pytest.approx(float(row["Qext"]), rel=2e-9, abs=0)
    assert average.scattering_efficiency == pytest.approx(float(row["Qsca"]), rel=2e-9, abs=0)
    assert average.asymmetry_parameter == pytest.approx(float(row["g"]), rel=2e-9, abs=0)


MATRICES = rows("spheroid_matrices.csv")


@pytest.mark.parametrize("case", sorted({key(row) for row in MATRICES}), ids="-".join)
def test_spheroid_matrix(case):
    table = [row for row in MATRICES if key(row) == case]
    angles = [float(row["angle_deg"]) for row in table]
    assert angles == list(np.arange(0, 181, 5))
    matrix = spheroid_average(*case).scattering_matrix(angles)
    f11 = matrix[:, 0, 0]
    columns = {
        "F22/F11": matrix[:, 1, 1] / f11,
        "F33/F11": matrix[:, 2, 2] / f11,
        "F44/F11": matrix[:, 3, 3] / f11,
        "-F12/F11": -matrix[:, 0, 1] / f11,
        "F34/F11": matrix[:, 2, 3] / f11,
    }
    # eight significant digits: 5e-8 at most of F11, 5e-9 of ratios below 1
    np.testing.assert_allclose(f11, [float(row["F11"]) for row in table], rtol=6e-8)
    for name, values in columns.items():
        expected = [float(row[name]) for row in table]
        np.testing.assert_allclose(values, expected, atol=1e-8, err_msg=name)
