"""Bulk properties as lines and rows for people to read."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from scatterloom.bulk.schema import FLAGS

NOTHING = "–"
SHOWN = (
    ("extinction_cross_section", "extinction (µm²)"),
    ("extinction_per_volume", "extinction per volume (1/µm)"),
    ("extinction_per_mass", "extinction per mass (m²/g)"),
    ("single_scattering_albedo", "single-scattering albedo"),
    ("asymmetry_parameter", "asymmetry parameter"),
    ("lidar_ratio", "lidar ratio (sr)"),
    ("linear_depolarization_ratio", "linear depolarization"),
    ("circular_depolarization_ratio", "circular depolarization"),
    ("backscatter_per_volume", "backscatter per volume (1/µm sr)"),
    ("extinction_angstrom_exponent", "Ångström exponent to next"),
    ("colour_ratio", "colour ratio to next"),
)


def with_half_width(value: float, half_width: float) -> str:
    """Write a value and its half width to two digits of the half width.

    Parameters
    ----------
    value, half_width : float
        NaN is written as a dash.
    """
    if not np.isfinite(value):
        return NOTHING
    if not (np.isfinite(half_width) and half_width > 0):
        return f"{value:.5g}"
    # Two digits of the half width, but never more than six digits of the value.
    first = int(np.floor(np.log10(half_width)))
    scale = int(np.floor(np.log10(max(abs(value), half_width))))
    digits = min(max(0, 1 - first), 5 - scale)
    if digits > 8 or scale > 5:
        return f"{value:.3g} ± {half_width:.2g}"
    return f"{value:.{max(0, digits)}f} ± {half_width:.{max(0, digits)}f}"


def flag_names(flags: int) -> list[str]:
    """Names of the bits that are set, in words."""
    return [name.replace("_", " ") for name, mask in FLAGS.items() if flags & mask]


def rows(columns: Mapping[str, Any]) -> list[dict[str, Any]]:
    """One row for each population and wavelength.

    Parameters
    ----------
    columns : mapping of str to array
        Variables of a bulk table.

    Returns
    -------
    list of dict
        population, wavelength_um, values (texts by label) and warnings (list of str).
    """
    out = []
    for i, name in enumerate(columns["population"]):
        for w, wavelength in enumerate(columns["wavelength"]):
            values = {
                label: with_half_width(
                    float(columns[key][i, w]), float(columns[f"{key}_error"][i, w])
                )
                for key, label in SHOWN
            }
            out.append(
                {
                    "population": str(name),
                    "wavelength_um": f"{float(wavelength):g}",
                    "values": values,
                    "warnings": flag_names(int(columns["warning_flags"][i, w])),
                }
            )
    return out


def listing(columns: Mapping[str, Any]) -> list[str]:
    """Lines that show every population at every wavelength."""
    lines = []
    for row in rows(columns):
        lines.append(f"{row['population']} at {row['wavelength_um']} µm")
        shown = {label: text for label, text in row["values"].items() if text != NOTHING}
        lines += [f"  {label:<34}{text}" for label, text in shown.items()]
        lines += [f"  flagged: {warning}" for warning in row["warnings"]]
    return lines
