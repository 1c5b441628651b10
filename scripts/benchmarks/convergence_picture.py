"""Picture of errors against cells across."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import matplotlib.pyplot as plt
import numpy as np
from matplotlib.ticker import NullFormatter

STYLES = {
    "staircase": ("#999999", "o", ":"),
    "scalar mean": ("#E69F00", "s", "--"),
    "tensor": ("#0072B2", "^", "-."),
    "as used": ("#D55E00", "D", "-"),
    "as used, extrapolated": ("black", "v", "-"),
}
"""Colour (Okabe & Ito 2008), marker and line of every kind of cells."""

MEASURES = {"F11_rms_percent": "F11, rms error [%]", "worst_ratio_error": "worst error of Fij/F11"}


def draw_convergence(path: Path, rows: Sequence[Mapping[str, Any]]) -> None:
    """One column a particle, one row a measure, logarithmic axes."""
    particles = list(dict.fromkeys(row["particle"] for row in rows))
    figure, axes = plt.subplots(
        len(MEASURES), len(particles), figsize=(2.7 * len(particles), 6.4), sharey="row"
    )
    for column, particle in enumerate(particles):
        for ax, (measure, label) in zip(axes[:, column], MEASURES.items(), strict=True):
            for kind, (colour, marker, line) in STYLES.items():
                chosen = [r for r in rows if r["particle"] == particle and r["cells"] == kind]
                across = [int(r["cells across"].split(", ")[-1]) for r in chosen]
                ax.loglog(
                    across,
                    [r[measure] for r in chosen],
                    color=colour,
                    marker=marker,
                    linestyle=line,
                    markersize=5,
                    label=kind,
                )
            n = np.array([12.0, 32.0])
            start = max(r[measure] for r in rows if r["particle"] == particle)
            ax.loglog(
                n, 0.5 * start * (12.0 / n) ** 2, color="0.7", linewidth=5, alpha=0.5, zorder=0
            )
            ax.xaxis.set_minor_formatter(NullFormatter())
            ax.set_xticks([12, 16, 24, 32], ["12", "16", "24", "32"])
            ax.grid(color="0.9")
            if column == 0:
                ax.set_ylabel(label)
        axes[0, column].set_title(particle, fontsize=11)
        axes[-1, column].set_xlabel("cells across (finest)")
    handles, labels = axes[0, 0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="lower center", ncols=len(STYLES), frameon=False)
    figure.text(0.01, 0.005, "grey band: slope of $d^2$", fontsize=9)
    figure.tight_layout(rect=(0, 0.05, 1, 1))
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
