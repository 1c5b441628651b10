"""The audit passes physical matrices and names every planted violation."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from scatterloom.scattering.audit import (
    CHECKS,
    ENERGY_CHECKS,
    MATRIX_CHECKS,
    audit_energy,
    audit_matrix,
    coherency_eigenvalue,
)
from scatterloom.scattering.quadrature import angle_integral, angle_weights

ANGLES = np.arange(0.0, 181.0, 2.0)
HALF = 1e-3


def depolarizing_rayleigh(angles_deg: np.ndarray, depolarization: float = 0.04) -> np.ndarray:
    """Anisotropic Rayleigh scattering (Hansen & Travis 1974, eqs. 2.15 and 2.16)."""
    rho = depolarization
    delta, prime = (1 - rho) / (1 + rho / 2), (1 - 2 * rho) / (1 - rho)
    c = np.cos(np.deg2rad(angles_deg))
    f = np.zeros((c.size, 4, 4))
    f[:, 0, 0] = delta * 0.75 * (1 + c**2) + 1 - delta
    f[:, 1, 1] = delta * 0.75 * (1 + c**2)
    f[:, 0, 1] = f[:, 1, 0] = -delta * 0.75 * (1 - c**2)
    f[:, 2, 2] = delta * 1.5 * c
    f[:, 3, 3] = delta * prime * 1.5 * c
    return f


def bars(matrix: np.ndarray, size: float = HALF) -> np.ndarray:
    return np.full_like(matrix, size)


def clean(asymmetry: float = 0.0) -> dict[str, np.ndarray]:
    f = depolarizing_rayleigh(ANGLES)
    return audit_matrix(f, bars(f), ANGLES, asymmetry, 1e-4)


def test_a_physical_matrix_passes_every_check() -> None:
    result = clean()
    assert set(result) == {check.name for check in MATRIX_CHECKS}
    for name, deviation in result.items():
        assert deviation < 1e-4, name  # truncation of the slope formula


def test_a_physical_matrix_with_no_error_bar_passes_within_rounding() -> None:
    f = depolarizing_rayleigh(ANGLES)
    for name, deviation in audit_matrix(f, bars(f, 0.0), ANGLES, 0.0, 0.0).items():
        assert deviation < 1.0, name


def shift(row: int, col: int, at: int, by: float):
    def plant(f: np.ndarray) -> None:
        f[at, row, col] += by
        if (row, col) == (0, 1):
            f[at, 1, 0] += by
        if (row, col) == (2, 3):
            f[at, 3, 2] -= by

    return plant


def slope(at_end: bool):
    def plant(f: np.ndarray) -> None:
        t = np.deg2rad(180.0 - ANGLES if at_end else ANGLES)
        # One step is 0.035 rad: a change of 0.1 rad^-1 moves F33 by 3.5 half widths.
        f[:, 2, 2] += 0.1 * t * np.exp(-((t / 0.5) ** 2))

    return plant


def beyond_physical(f: np.ndarray) -> None:
    f[45, 0, 1] = f[45, 1, 0] = 1.02 * f[45, 0, 0]


def too_bright(f: np.ndarray) -> None:
    f *= 1.005


def lopsided(f: np.ndarray) -> None:
    f[:, 0, 0] *= 1 + 0.02 * np.cos(np.deg2rad(ANGLES))


PLANTED = {
    "forward_f22_f33": shift(2, 2, 0, -5 * HALF),
    "forward_f12": shift(0, 1, 0, 3 * HALF),
    "forward_f34": shift(2, 3, 0, -3 * HALF),
    "backward_f22_f33": shift(2, 2, -1, 5 * HALF),
    "backward_f12": shift(0, 1, -1, -3 * HALF),
    "backward_f34": shift(2, 3, -1, 3 * HALF),
    "backward_f44": shift(3, 3, -1, 10 * HALF),
    "forward_slope": slope(False),
    "backward_slope": slope(True),
    "six_elements": shift(0, 3, 30, 4 * HALF),
    "eigenvalues": beyond_physical,
    "normalization": too_bright,
    "asymmetry": lopsided,
}


def test_every_matrix_check_has_a_planted_violation() -> None:
    assert set(PLANTED) == {check.name for check in MATRIX_CHECKS}


@pytest.mark.parametrize("name", sorted(PLANTED))
def test_a_planted_violation_is_named(name: str) -> None:
    f = depolarizing_rayleigh(ANGLES)
    PLANTED[name](f)
    result = audit_matrix(f, bars(f), ANGLES, 0.0, 1e-4)
    assert result[name] > 1.0
    # The same violation is covered by a wide enough bar.
    covered = audit_matrix(f, bars(f, 0.2), ANGLES, 0.0, 0.2)
    assert covered[name] < 1.0


def test_deviation_is_in_units_of_the_error_bar() -> None:
    f = depolarizing_rayleigh(ANGLES)
    f[0, 0, 1] = 7 * HALF
    assert audit_matrix(f, bars(f), ANGLES)["forward_f12"] == pytest.approx(7.0, rel=1e-5)


def test_checks_that_cannot_be_made_are_not_passed() -> None:
    angles = np.arange(10.0, 171.0, 10.0)
    f = depolarizing_rayleigh(angles)
    result = audit_matrix(f, bars(f), angles)
    judged = {name for name, value in result.items() if not np.isnan(value)}
    assert judged == {"six_elements", "eigenvalues"}


def test_missing_cases_stay_missing_beside_solved_ones() -> None:
    f = np.stack([depolarizing_rayleigh(ANGLES), np.full((ANGLES.size, 4, 4), np.nan)])
    result = audit_matrix(f, bars(f), ANGLES, np.array([0.0, np.nan]), np.array([1e-4, np.nan]))
    for name, deviation in result.items():
        assert deviation[0] < 1.0, name
        assert np.isnan(deviation[1]), name


def test_coherency_eigenvalues_of_jones_ensembles() -> None:
    """A pure Mueller matrix has one eigenvalue, an ensemble of them none below zero."""
    rng = np.random.default_rng(3)
    # Mueller matrix by the Kronecker product (e.g. Bohren & Huffman 1983, chapter 3).
    a = np.array([[1, 0, 0, 1], [1, 0, 0, -1], [0, 1, 1, 0], [0, 1j, -1j, 0]])
    jones = rng.normal(size=(50, 2, 2)) + 1j * rng.normal(size=(50, 2, 2))
    pure = np.array([(a @ np.kron(j, j.conj()) @ np.linalg.inv(a)).real for j in jones])
    assert np.abs(coherency_eigenvalue(pure)).max() < 1e-13
    assert coherency_eigenvalue(pure.mean(axis=0)) > 0.01
    turned = pure.copy()
    turned[:, 3, :] *= -1  # reverses handedness of the outgoing light only: not physical
    assert coherency_eigenvalue(turned).max() < -0.01


def test_closed_form_of_the_eigenvalue_equals_the_general_one() -> None:
    rng = np.random.default_rng(9)
    f = np.zeros((40, 4, 4))
    f[:, [0, 1, 2, 3], [0, 1, 2, 3]] = rng.uniform(-1, 1, size=(40, 4))
    f[:, 0, 0] = rng.uniform(0.5, 2, size=40)
    f[:, 0, 1] = f[:, 1, 0] = rng.uniform(-1, 1, size=40)
    f[:, 2, 3] = rng.uniform(-1, 1, size=40)
    f[:, 3, 2] = -f[:, 2, 3]
    nearly = f.copy()
    nearly[0, 0, 3] = 1e-8  # enough to leave the closed form
    np.testing.assert_allclose(coherency_eigenvalue(f), coherency_eigenvalue(nearly), atol=1e-7)


def energy(**changes: float) -> dict[str, np.ndarray]:
    values = {
        "extinction_efficiency": 2.0,
        "scattering_efficiency": 1.8,
        "absorption_efficiency": 0.2,
        "single_scattering_albedo": 0.9,
    } | changes
    return audit_energy(values, dict.fromkeys(values, 1e-3), values["absorption_efficiency"] > 0)


def test_energy_checks() -> None:
    names = {check.name for check in ENERGY_CHECKS}
    good = energy()
    assert set(good) == names
    assert np.isnan(good["lossless"])
    assert all(good[name] < 1e-6 for name in names - {"lossless"})
    assert energy(scattering_efficiency=1.81)["energy_balance"] > 1
    assert energy(single_scattering_albedo=0.91)["albedo"] > 1
    over = energy(scattering_efficiency=2.02, single_scattering_albedo=1.01)
    assert over["albedo"] > 1
    assert energy(absorption_efficiency=-0.01)["absorption_sign"] > 1
    lossless = audit_energy(
        {
            "extinction_efficiency": 2.0,
            "scattering_efficiency": 1.99,
            "absorption_efficiency": 0.01,
            "single_scattering_albedo": 0.995,
        },
        dict.fromkeys(
            (
                "extinction_efficiency",
                "scattering_efficiency",
                "absorption_efficiency",
                "single_scattering_albedo",
            ),
            1e-3,
        ),
        False,
    )
    assert lossless["lossless"] > 1
    assert lossless["energy_balance"] < 1


def spheroids() -> dict[str, tuple[np.ndarray, np.ndarray, float]]:
    """Exact matrices of randomly oriented spheroids (see tests/check_values/README.md)."""
    folder = Path(__file__).parents[1] / "check_values"
    with open(folder / "spheroids.csv", newline="") as stream:
        g = {
            (row["equatorial_to_polar"], row["m"], row["x_equal_volume"]): float(row["g"])
            for row in csv.DictReader(stream)
        }
    rows: dict[tuple[str, str, str], list[dict[str, str]]] = {}
    with open(folder / "spheroid_matrices.csv", newline="") as stream:
        for row in csv.DictReader(stream):
            key = (row["equatorial_to_polar"], row["m"], row["x_equal_volume"])
            rows.setdefault(key, []).append(row)
    out = {}
    for key, listed in rows.items():
        f = np.zeros((len(listed), 4, 4))
        f11 = np.array([float(row["F11"]) for row in listed])
        f[:, 0, 0] = f11
        for i, name in enumerate(("F22/F11", "F33/F11", "F44/F11"), start=1):
            f[:, i, i] = f11 * [float(row[name]) for row in listed]
        f[:, 0, 1] = f[:, 1, 0] = -f11 * [float(row["-F12/F11"]) for row in listed]
        f[:, 2, 3] = f11 * [float(row["F34/F11"]) for row in listed]
        f[:, 3, 2] = -f[:, 2, 3]
        out[" ".join(key)] = (np.array([float(row["angle_deg"]) for row in listed]), f, g[key])
    return out


@pytest.mark.parametrize("name", sorted(spheroids()))
def test_exact_spheroids_pass(name: str) -> None:
    angles, f, g = spheroids()[name]
    # The table has eight digits.
    half_width = 2e-7 * np.maximum(f[:, :1, :1], 1.0) * np.ones((4, 4))
    for check, deviation in audit_matrix(f, half_width, angles, g, 1e-9).items():
        assert deviation < 1.0, check


def test_names_are_unique() -> None:
    assert len({check.name for check in CHECKS}) == len(CHECKS)


def test_angle_weights_integrate_series_exactly() -> None:
    weights = angle_weights(ANGLES)
    assert weights.sum() == pytest.approx(2.0, abs=1e-14)
    x = np.cos(np.deg2rad(ANGLES))
    for degree in range(0, 90, 7):
        exact = 2.0 / (degree + 1) if degree % 2 == 0 else 0.0  # int x^n dx over [-1, 1]
        assert weights @ x**degree == pytest.approx(exact, abs=1e-13)


def test_uneven_grid_and_its_error_estimate() -> None:
    angles = np.concatenate([np.arange(0, 10, 0.5), np.arange(10, 180.1, 2.0)])
    assert angle_weights(angles).sum() == pytest.approx(2.0, abs=1e-13)
    x = np.cos(np.deg2rad(angles))
    value, error = angle_integral(np.exp(3 * x), angles)
    exact = (np.exp(3.0) - np.exp(-3.0)) / 3.0
    assert abs(value - exact) < error
    assert error < 0.01 * exact
    with pytest.raises(ValueError, match="0 to 180"):
        angle_weights([0.0, 90.0])
