"""Picture of coverage by regime."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import matplotlib.pyplot as plt
import numpy as np

SORTS = {"elements": ("o", "#0072B2"), "ratios": ("s", "#D55E00"), "scalars": ("^", "#009E73")}
"""Marker and colour, distinct for colour-blind readers (Okabe & Ito 2008)."""


def draw_regimes(path: Path, regimes: Sequence[Mapping[str, Any]], overall: float) -> None:
    """Coverage of elements, ratios and scalars in every regime, with the aims 90 and 95 %."""
    figure, ax = plt.subplots(figsize=(8, 6))
    place = np.zeros(len(regimes))
    for i, row in enumerate(regimes[1:], 1):
        place[i] = place[i - 1] + (1.0 if row["group"] == regimes[i - 1]["group"] else 1.7)
    lowest = min(min(row[sort] for sort in SORTS) for row in regimes)
    for shift, (sort, (marker, colour)) in zip((-0.2, 0.0, 0.2), SORTS.items(), strict=True):
        ax.plot(
            [row[sort] for row in regimes],
            place + shift,
            marker=marker,
            color=colour,
            linestyle="none",
            markersize=7,
            label={"elements": "Fij", "ratios": "Fij/F11", "scalars": "efficiencies, g, albedo"}[
                sort
            ],
            zorder=3,
            clip_on=False,
        )
    ax.axvline(95.0, color="black", linewidth=1.2)
    ax.axvline(90.0, color="black", linewidth=1.2, linestyle="--")
    ax.set_yticks(place, [f"{row['regime']} ({row['cases']})" for row in regimes])
    ax.invert_yaxis()
    ax.set_xlim(min(85.0, 5.0 * np.floor(lowest / 5.0)), 100.0)
    ax.grid(axis="y", color="0.9")
    ax.set_axisbelow(True)
    ax.set_xlabel("values whose 95 % half width holds the exact value [%]")
    ax.set_title(
        f"Coverage by regime (scored cases); all values {overall:.1f} %\n"
        "solid line: aim 95 %, dashed: at least 90 %",
        fontsize=11,
    )
    ax.legend(loc="lower center", bbox_to_anchor=(0.4, -0.24), ncols=3, frameon=False)
    figure.tight_layout()
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
