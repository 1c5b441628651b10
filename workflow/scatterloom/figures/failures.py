"""What the report says of cells without a result, and of those with a warning."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.reasons import REASONS, WARNING_ADVICE, reason_of
from scatterloom.scattering.record import FAILED, FLAGS, MISSING, SOLVED_WITH_WARNING

if TYPE_CHECKING:
    import xarray

LISTED = 50
"""Most cells listed of one reason; the table has them all."""


def failures(table: xarray.Dataset) -> list[dict[str, Any]]:
    """Group the failed, missing and warned cells of a table by what is to be changed.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.

    Returns
    -------
    list of dict
        In the order failed (by number of the reason), missing, warned (by bit): kind,
        number (of the reason; None if it did not fail), flag, meaning, advice, count, and
        cells, at most `LISTED` of them in the order of the table, each with particle,
        wavelength_um, radius_um and size_parameter. A cell with several warnings is in the
        group of each.
    """
    status = np.asarray(table["status"].values)
    flags = np.asarray(table["warning_flags"].values).astype(np.int64)
    groups: list[dict[str, Any]] = []

    def add(kind: str, number: int | None, words: tuple[str, str, str], where: Any) -> None:
        if not where.any():
            return
        flag, meaning, advice = words
        said = {"kind": kind, "number": number, "flag": flag, "meaning": meaning}
        found = {"count": int(where.sum()), "cells": _cells(table, where)}
        groups.append(said | {"advice": advice} | found)

    failed = status == FAILED
    numbers = np.zeros(status.shape, dtype=np.int64)
    for bits in np.unique(flags[failed]):
        numbers[failed & (flags == bits)] = reason_of(int(bits)).number
    for reason in REASONS:
        where = failed & (numbers == reason.number)
        add("failed", reason.number, (reason.flag, reason.meaning, reason.advice), where)
    unknown = ("missing", "no result has been gathered for these cells", "run the campaign again")
    add("missing", None, unknown, status == MISSING)
    warned = status == SOLVED_WITH_WARNING
    for flag, advice in WARNING_ADVICE.items():
        bit, meaning = FLAGS[flag]
        add("warned", None, (flag, meaning, advice), warned & ((flags & bit) > 0))
    return groups


def _cells(table: xarray.Dataset, where: NDArray[np.bool_]) -> list[dict[str, Any]]:
    # Sizes need not differ between particles.
    radius, x = (
        table[name].broadcast_like(table["status"]).values
        for name in ("radius_um", "size_parameter")
    )
    return [
        {
            "particle": str(table["particle"].values[p]),
            "wavelength_um": float(table["wavelength"].values[w]),
            "radius_um": float(radius[p, w, s]),
            "size_parameter": float(x[p, w, s]),
        }
        for p, w, s in np.argwhere(where)[:LISTED]
    ]
