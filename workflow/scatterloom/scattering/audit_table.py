"""The audit of a whole table: every identity for every case, summed up."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.errors import IntegrityError
from scatterloom.scattering.audit import CHECKS, FloatArray, audit_energy, audit_matrix
from scatterloom.scattering.error_bars import BUDGET, over_angle
from scatterloom.scattering.handed import handed_particles
from scatterloom.scattering.record import SOLVED, STATUS_MEANINGS, has_result

if TYPE_CHECKING:
    import xarray

FORMAT_VERSION = 1
_EFFICIENCIES = (
    "extinction_efficiency",
    "scattering_efficiency",
    "absorption_efficiency",
    "single_scattering_albedo",
)
_ACCURACY = {
    "f11_relative": "F11, relative, root mean square over angle",
    "ratio_absolute": "the worst ratio Fij/F11, root mean square over angle",
    "efficiency_relative": "the worse of extinction and scattering efficiency, relative",
}


def audit_table(table: xarray.Dataset, asked: dict[str, float]) -> dict[str, Any]:
    """Audit a table.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    asked : dict of str to float
        Accuracy asked: f11_relative, ratio_absolute, efficiency_relative.

    Returns
    -------
    dict
        Fit for JSON: counts of cells by status and by warning; for each check the
        number of cases judged, not judged and flagged and the worst deviation in
        units of the error bar; for each kind of accuracy the half widths reached.
        ``short`` counts the cases solved without a warning whose half widths at the
        table's angles are wider than asked (the solver judged its own angles and
        warns of all others). ``passed`` is whether nothing is missing, failed, warned,
        flagged or short.
    """
    shape = tuple(table.sizes[d] for d in ("particle", "wavelength", "size"))
    deviations = {check.name: np.full(shape, np.nan) for check in CHECKS}
    reached = {name: np.full(shape, np.nan) for name in _ACCURACY}
    handed = handed_particles(table)
    for p, w in np.ndindex(shape[:2]):
        part = table.isel(particle=p, wavelength=w).load()
        for name, value in _audit_ladder(part).items():
            deviations[name][p, w] = value
        if str(part["particle"].values) in handed:
            # Sixteen elements are right for a body unlike its mirror image.
            deviations["six_elements"][p, w] = np.nan
        for name, value in _half_widths(part).items():
            reached[name][p, w] = value

    status = table["status"].values
    solved = has_result(status)
    cells = {name: int((status == value).sum()) for value, name in enumerate(STATUS_MEANINGS)}
    lossless = ~_absorbing(table)[:, :, None]
    checks = []
    for check in CHECKS:
        # The check of lossless particles has nothing to judge in absorbing ones.
        cases = solved & lossless if check.name == "lossless" else solved
        result = _judge(table, deviations[check.name], cases, 1.0)
        checks.append({"name": check.name, "statement": check.statement, **result})
    accuracy = []
    short = np.zeros(shape, dtype=bool)
    for name, words in _ACCURACY.items():
        result = _judge(table, reached[name], solved, asked[name])
        known = reached[name][np.isfinite(reached[name])]
        short |= (status == SOLVED) & (reached[name] > asked[name])
        accuracy.append(
            {
                "name": name,
                "statement": words,
                "asked": asked[name],
                "median": _number(float(np.median(known))) if known.size else None,
                "above": result["flagged"],
                "judged": result["judged"],
                "worst": result["worst"],
                "worst_case": result["worst_case"],
            }
        )
    flagged = sum(check["flagged"] for check in checks)
    return {
        "format_version": FORMAT_VERSION,
        "campaign": str(table.attrs.get("campaign", "")),
        "table_content_digest": str(table.attrs.get("content_digest", "")),
        "cells": cells,
        "warnings": _warnings(table),
        "unit": "deviations are in units of the error bar; above 1 is flagged",
        "checks": checks,
        "accuracy": accuracy,
        "budget": _budget(table, solved),
        "flagged": flagged,
        "short": int(short.sum()),
        "passed": flagged == 0 and cells["solved"] == status.size and not short.any(),
    }


def _absorbing(part: xarray.Dataset) -> NDArray[np.bool_]:
    """Whether any material of a particle absorbs; a core that is not there is NaN."""
    return np.asarray(
        (part["refractive_index_k"].values > 0.0) | (part["core_refractive_index_k"].values > 0.0)
    )


def _audit_ladder(part: xarray.Dataset) -> dict[str, FloatArray]:
    """Deviations of all sizes of one particle at one wavelength."""
    matrix = audit_matrix(
        part["scattering_matrix"].values,
        part["scattering_matrix_error"].values,
        part["angle"].values,
        part["asymmetry_parameter"].values,
        part["asymmetry_parameter_error"].values,
    )
    absorbing = np.full(part.sizes["size"], _absorbing(part))
    values = {name: part[name].values for name in _EFFICIENCIES}
    half_widths = {name: part[f"{name}_error"].values for name in _EFFICIENCIES}
    return matrix | audit_energy(values, half_widths, absorbing)


def _half_widths(part: xarray.Dataset) -> dict[str, FloatArray]:
    half_width = part["scattering_matrix_ratio_error"].values.astype(np.float64)
    f11, ratio = over_angle(half_width, part["angle"].values)
    efficiencies = np.stack(
        [part[f"{name}_error"].values / np.abs(part[name].values) for name in _EFFICIENCIES[:2]]
    )
    return {
        "f11_relative": f11,
        "ratio_absolute": ratio,
        "efficiency_relative": efficiencies.max(axis=0),
    }


_BUDGET = {
    **{f"f11_error_{part}": f"half width of F11 due to {part}" for part in BUDGET},
    "extrapolation_disagreement": "rival extrapolations differ, over the step",
}


def _budget(table: xarray.Dataset, solved: np.ndarray) -> list[dict[str, Any]]:
    """Parts of the error of F11 and the health of the extrapolation over the lattices."""
    rows = []
    for name, words in _BUDGET.items():
        values = table[name].values
        judged = _judge(table, values, solved, math.inf)
        known = values[np.isfinite(values)]
        rows.append(
            {
                "name": name,
                "statement": words,
                "median": _number(float(np.median(known))) if known.size else None,
                "worst": judged["worst"],
                "worst_case": judged["worst_case"],
            }
        )
    return rows


def _judge(
    table: xarray.Dataset, values: FloatArray, solved: np.ndarray, limit: float
) -> dict[str, Any]:
    known = np.isfinite(values)
    # A solved case with an infinite deviation (an error bar of zero) is worse than flagged.
    known |= np.isinf(values)
    worst = None
    place = None
    if known.any():
        at = np.unravel_index(int(np.nanargmax(values)), values.shape)
        worst = _number(float(values[at]))
        p, w, s = (int(i) for i in at)
        ladder = table.isel(particle=p, wavelength=w)
        place = {
            "particle": str(ladder["particle"].values),
            "wavelength_um": _number(float(ladder["wavelength"])),
            "size_parameter": _number(float(ladder["size_parameter"].values[s])),
        }
    return {
        "judged": int(known.sum()),
        "not_judged": int((solved & ~known).sum()),
        "flagged": int((values[known] > limit).sum()),
        "worst": worst,
        "worst_case": place,
    }


def _warnings(table: xarray.Dataset) -> dict[str, int]:
    flags = table["warning_flags"]
    names = str(flags.attrs.get("flag_meanings", "")).split()
    masks = np.atleast_1d(flags.attrs.get("flag_masks", [])).tolist()
    counts = {
        name: int((flags.values & int(mask) != 0).sum())
        for name, mask in zip(names, masks, strict=True)
    }
    return {name: count for name, count in counts.items() if count}


def _number(value: float) -> float | None:
    if math.isinf(value):
        return 1e300  # JSON has no infinity
    return float(f"{value:.6g}")


def read_audit(path: Path, table_digest: str) -> dict[str, Any]:
    """Read audit.json.

    Parameters
    ----------
    path : Path
    table_digest : str
        Content digest of the table that it must be about.

    Returns
    -------
    dict
        As `audit_table` returns it.

    Raises
    ------
    IntegrityError
        If it is missing, unreadable or about another table.
    """
    hint = "\n  hint: run 'scatterloom audit' again"
    try:
        result: dict[str, Any] = json.loads(path.read_bytes())
        digest, version = result["table_content_digest"], result["format_version"]
    except FileNotFoundError:
        raise IntegrityError(f"{path}: not written yet{hint}") from None
    except (ValueError, KeyError, TypeError):
        raise IntegrityError(f"{path}: unreadable{hint}") from None
    if digest != table_digest or version != FORMAT_VERSION:
        raise IntegrityError(f"{path}: about another table than the one beside it{hint}")
    return result
