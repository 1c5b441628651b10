"""Ratios of elements and depolarization: closed forms, and half widths of their own."""

from __future__ import annotations

import numpy as np

from scatterloom.scattering.elements import (
    RATIOS,
    circular_depolarization,
    linear_depolarization,
    ratio,
)


def test_ratios_are_the_five_of_a_mirror_symmetric_ensemble() -> None:
    f = np.arange(1.0, 17.0).reshape(4, 4)
    expected = {
        "f22_f11": 6.0,
        "f33_f11": 11.0,
        "f44_f11": 16.0,
        "minus_f12_f11": -2.0,
        "f34_f11": 12.0,
    }
    assert {r.name: float(ratio(f, np.zeros((4, 4)), r)[0]) for r in RATIOS} == expected


def test_the_half_width_of_a_ratio_is_its_own() -> None:
    f = np.arange(1.0, 17.0).reshape(4, 4)
    h = np.arange(16.0).reshape(4, 4) / 100
    for which in RATIOS:
        assert ratio(f, h, which)[1] == h[which.row, which.col]


def test_depolarization_ratios_of_random_orientation_are_tied() -> None:
    """At 180 deg F44 = F11 - 2 F22, hence dC = 2 dL / (1 - dL) (Mishchenko & Hovenier 1995)."""
    r = np.linspace(0.3, 1.0, 8)
    linear, linear_width = linear_depolarization(r, np.full(8, 1e-6))
    circular, circular_width = circular_depolarization(1.0 - 2.0 * r, np.full(8, 1e-6))
    np.testing.assert_allclose(circular, 2 * linear / (1 - linear), rtol=1e-13)
    moved, _ = linear_depolarization(r + 1e-6, 0.0)
    np.testing.assert_allclose(np.abs(moved - linear), linear_width, rtol=1e-5)
    moved, _ = circular_depolarization(1.0 - 2.0 * r + 1e-6, 0.0)
    np.testing.assert_allclose(np.abs(moved - circular), circular_width, rtol=1e-5)
