"""The oracles against tabulated values; sources in tests/check_values/README.md and each row."""

import csv
from pathlib import Path

import pytest

from oracles.mie import sphere

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
    assert ball.extinction_efficiency == pytest.approx(float(row["Qext"]), rel=2e-11)
    assert ball.scattering_efficiency == pytest.approx(float(row["Qsca"]), rel=2e-11)
    assert ball.absorption_efficiency == pytest.approx(
        float(row["Qabs"]), rel=1e-9, abs=1e-12 * ball.extinction_efficiency
    )
    assert ball.asymmetry_parameter == pytest.approx(float(row["g"]), rel=2e-11)
    back = pytest.approx(float(row["Qback"]), rel=max(2e-11, 1e-11 * x))
    assert ball.backscattering_efficiency == back
