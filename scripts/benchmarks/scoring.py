"""Errors of records in units of their half widths, by quantity and by regime."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from benchmarks.drawn import Drawn, Reference
from scatterloom.scattering.record import SCALARS, CaseRecord

ANGLES_DEG = np.arange(0.0, 181.0, 3.0)
ELEMENTS = ((0, 0), (1, 1), (2, 2), (3, 3), (0, 1), (2, 3))
ROUNDING = 1e-9
"""Of F11: elements that are exactly zero at 0 and 180 degrees differ by rounding."""
NO_ERROR = 1e-8
"""Errors below do not count in the ratio of width to error."""

Pairs = Mapping[str, NDArray[np.float64]]
"""Error and half width (2, n) of every quantity of a case; relative, or over F11."""


@dataclass(frozen=True)
class Scored:
    """A case with its errors and half widths."""

    case: Drawn
    pairs: Pairs


REGIMES: dict[str, dict[str, Callable[[Drawn], bool]]] = {
    "size": {
        "x < 0.8": lambda c: c.size_parameter < 0.8,
        "0.8 < x < 1.6": lambda c: 0.8 <= c.size_parameter < 1.6,
        "1.6 < x < 3.2": lambda c: 1.6 <= c.size_parameter < 3.2,
        "x > 3.2": lambda c: c.size_parameter >= 3.2,
    },
    "index": {
        "|m| < 1.3": lambda c: c.strongest < 1.3,
        "1.3 < |m| < 1.6": lambda c: 1.3 <= c.strongest < 1.6,
        "|m| > 1.6": lambda c: c.strongest >= 1.6,
    },
    "absorption": {
        "not absorbing": lambda c: not c.absorbing,
        "absorbing": lambda c: c.absorbing,
    },
}
"""Regimes beside the kinds of particle; a coated sphere counts by its larger |m|."""


def error_pairs(case: Drawn, record: CaseRecord, exact: Reference) -> Pairs:
    """Error and half width of all quantities of one case."""
    wanted = exact.scattering_matrix(ANGLES_DEG)
    found, half_width, ratio_width = record.scattering_matrix(ANGLES_DEG)
    f11 = wanted[:, 0, 0]
    out: dict[str, NDArray[np.float64]] = {}
    for i, j in ELEMENTS:
        error = np.abs(found[:, i, j] - wanted[:, i, j]) / f11
        out[f"F{i + 1}{j + 1}"] = np.stack([error, half_width[:, i, j] / f11])
    for i, j in ELEMENTS[1:]:
        error = np.abs(found[:, i, j] / found[:, 0, 0] - wanted[:, i, j] / f11)
        out[f"F{i + 1}{j + 1}/F11"] = np.stack([error, ratio_width[:, i, j]])
    for name in SCALARS:
        if name in ("absorption_efficiency", "single_scattering_albedo") and not case.absorbing:
            continue
        value, width = record.scalars[name]
        expected = float(getattr(exact, name))
        out[name.replace("_", " ")] = np.array([[abs(value - expected)], [width]]) / abs(expected)
    return out


def is_ratio(quantity: str) -> bool:
    return "/" in quantity


def is_element(quantity: str) -> bool:
    return quantity.startswith("F") and not is_ratio(quantity)


def is_scalar(quantity: str) -> bool:
    return not quantity.startswith("F")


def pooled(
    scored: Iterable[Scored], chosen: Callable[[str], bool] = lambda quantity: True
) -> NDArray[np.float64]:
    """All errors and half widths (2, n) of the quantities chosen."""
    parts = [p for s in scored for name, p in s.pairs.items() if chosen(name)]
    return np.concatenate(parts, axis=1) if parts else np.zeros((2, 0))


def covered(pair: NDArray[np.float64]) -> float:
    """Percentage of values whose half width holds the exact value."""
    return 100.0 * float(np.mean(pair[0] <= pair[1] + ROUNDING))


def widths(pair: NDArray[np.float64]) -> tuple[float, float]:
    """Median of half width over error, and 95th percentile of error over half width."""
    counted = pair[0] > NO_ERROR
    ratio = pair[1, counted] / pair[0, counted]
    tail = np.percentile(pair[0] / (pair[1] + ROUNDING), 95.0)
    return float(np.median(ratio)) if ratio.size else float("nan"), float(tail)


def by_quantity(scored: Sequence[Scored]) -> list[dict[str, Any]]:
    """One row a quantity, and one of all values."""
    rows = []
    names = list(dict.fromkeys(name for s in scored for name in s.pairs))
    groups: list[tuple[str, Callable[[str], bool]]] = [
        (name, lambda quantity, name=name: quantity == name)  # type: ignore[misc]
        for name in names
    ]
    for label, chosen in (*groups, ("all values", lambda quantity: True)):
        having = [s for s in scored if any(chosen(name) for name in s.pairs)]
        pair = pooled(having, chosen)
        median, tail = widths(pair)
        single = [covered(pooled([s], chosen)) for s in having]
        rows.append(
            {
                "quantity": label,
                "cases": len(having),
                "inside_percent": covered(pair),
                "inside_percent, worst case": min(single),
                "median_error": float(np.median(pair[0])),
                "median_bar": float(np.median(pair[1])),
                "median of bar / error": median,
                "95th percentile of error / bar": tail,
            }
        )
    return rows


def regimes(scored: Sequence[Scored]) -> Iterable[tuple[str, str, list[Scored]]]:
    """Group, name and cases of every regime."""
    for kind in dict.fromkeys(sorted(s.case.kind for s in scored)):
        yield "kind", kind, [s for s in scored if s.case.kind == kind]
    for group, members in REGIMES.items():
        for name, belongs in members.items():
            yield group, name, [s for s in scored if belongs(s.case)]


def by_regime(scored: Sequence[Scored]) -> list[dict[str, Any]]:
    """One row a regime, with coverage by sort of quantity."""
    rows = []
    for group, name, members in regimes(scored):
        if not members:
            continue
        pair = pooled(members)
        median, tail = widths(pair)
        rows.append(
            {
                "regime": name,
                "group": group,
                "cases": len(members),
                "inside_percent": covered(pair),
                "elements": covered(pooled(members, is_element)),
                "ratios": covered(pooled(members, is_ratio)),
                "scalars": covered(pooled(members, is_scalar)),
                "median of bar / error": median,
                "95th percentile of error / bar": tail,
            }
        )
    return rows
