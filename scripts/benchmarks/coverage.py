"""How often the 95 % half widths hold the exact value, on random spheres and spheroids.

Cases are drawn anew from a fixed seed; nothing in the package was tuned to them.
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from benchmarks.cases import cold_record
from benchmarks.output import Result
from oracles.axial import random_orientation
from oracles.mie import sphere
from oracles.spheroid import spheroid
from scatterloom.scattering.record import SCALARS

SEED = 2026
CASES = 120
LARGEST_X, SMALLEST_X = 5.0, 0.3
ANGLES_DEG = np.arange(0.0, 181.0, 3.0)
ELEMENTS = ((0, 0), (1, 1), (2, 2), (3, 3), (0, 1), (2, 3))
LARGE_X = 1.5
"""Cases above are counted once more by themselves: small ones are easy."""
ROUNDING = 1e-9
"""Of F11: elements that are exactly zero at 0 and 180 degrees differ by rounding."""


@dataclass(frozen=True)
class Drawn:
    """A random case."""

    ratio: float
    index: complex
    size_parameter: float

    @property
    def kind(self) -> str:
        return "sphere" if self.ratio == 1.0 else "spheroid"


def draw(count: int, seed: int = SEED) -> list[Drawn]:
    """Random cases: x and the axis ratio evenly in their logarithms, a third of them spheres.

    Indices have real parts from 1.1 to 1.75; two in five do not absorb, the others have an
    imaginary part from 1e-4 to 0.3.
    """
    random = np.random.default_rng(seed)
    cases = []
    for _ in range(count):
        x = float(np.exp(random.uniform(np.log(SMALLEST_X), np.log(LARGEST_X))))
        ratio = float(np.exp(random.uniform(-np.log(3.0), np.log(3.0))))
        k = float(10.0 ** random.uniform(-4.0, -0.5))
        index = complex(round(random.uniform(1.1, 1.75), 3), k if random.random() > 0.4 else 0.0)
        cases.append(Drawn(1.0 if random.random() < 1 / 3 else ratio, index, x))
    return cases


def _errors(case: Drawn, threads: int) -> dict[str, NDArray[np.float64]]:
    """Error and half width (2, n) of every quantity of a case; relative, or over F11."""
    if case.kind == "sphere":
        exact: Any = sphere(case.index, case.size_parameter)
        spec: dict[str, Any] = {"kind": "sphere"}
    else:
        exact = random_orientation(spheroid(case.ratio, case.index, case.size_parameter))
        spec = {"kind": "spheroid", "equatorial_to_polar": case.ratio}
    record = cold_record(spec, case.index, case.size_parameter, threads)
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
        if name in ("absorption_efficiency", "single_scattering_albedo") and not case.index.imag:
            continue
        value, width = record.scalars[name]
        expected = float(getattr(exact, name))
        pair = np.array([[abs(value - expected)], [width]]) / abs(expected)
        out[name.replace("_", " ")] = pair
    return out


def run(threads: int) -> Result:
    """Solve the cases and count."""
    begun = time.perf_counter()
    collected: dict[str, dict[str, list[NDArray[np.float64]]]] = {}
    large: dict[str, list[NDArray[np.float64]]] = {}
    drawn = draw(CASES)
    for number, case in enumerate(drawn):
        for name, pair in _errors(case, threads).items():
            collected.setdefault(name, {}).setdefault(case.kind, []).append(pair)
            if case.size_parameter > LARGE_X:
                large.setdefault(name, []).append(pair)
        if sys.stderr.isatty():
            print(f"\r{number + 1} of {CASES}", end="", file=sys.stderr)
    rows = []
    score: dict[str, NDArray[np.float64]] = {}
    for name, kinds in collected.items():
        pairs = {kind: np.concatenate(parts, axis=1) for kind, parts in kinds.items()}
        error, width = np.concatenate(list(pairs.values()), axis=1)
        score[name] = error / (width + ROUNDING)
        cases = [part for parts in kinds.values() for part in parts]
        shares = [float(np.mean(part[0] <= part[1] + ROUNDING)) for part in cases]
        rows.append(
            {
                "quantity": name,
                "cases": len(cases),
                "inside_percent, spheres": _inside(pairs.get("sphere")),
                "inside_percent, spheroids": _inside(pairs.get("spheroid")),
                f"inside_percent, x > {LARGE_X:g}": _inside(np.concatenate(large[name], axis=1)),
                "inside_percent, worst case": 100.0 * min(shares),
                "median_error": float(np.median(error)),
                "median_bar": float(np.median(width)),
                "95th percentile of error / bar": float(np.percentile(score[name], 95)),
            }
        )
    print(f"{time.perf_counter() - begun:.0f} s", file=sys.stderr)
    return Result(
        rows,
        [
            f"{CASES} random cases, {sum(c.kind == 'sphere' for c in drawn)} of them spheres "
            f"(Mie series), the others spheroids 1:3 to 3:1 (extended boundary condition method); "
            f"x from {SMALLEST_X:g} to {LARGEST_X:g}, real index 1.1 to 1.75, absorbing or not; "
            "default accuracy, solved cold.",
            "'inside' counts values whose half width holds the exact value, over cases and, for "
            "matrix elements, angles 0, 3, ..., 180 deg; 95 is the aim. Values of one case at "
            "neighbouring angles are not independent.",
            "Elements are in units of F11 at their angle, scalars relative.",
            "A 95th percentile of error / bar of 1 is ideal; above 1 the bars are too narrow by "
            "that factor, below 1 too wide.",
        ],
        lambda path: _draw(path, score),
    )


def _inside(pair: NDArray[np.float64] | None) -> float | str:
    if pair is None:
        return "-"
    return 100.0 * float(np.mean(pair[0] <= pair[1] + ROUNDING))


def _draw(path: Path, score: dict[str, NDArray[np.float64]]) -> None:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    groups = {
        "elements": [name for name in score if name.startswith("F") and "/" not in name],
        "ratios to F11": [name for name in score if "/" in name],
        "scalars": [name for name in score if not name.startswith("F")],
    }
    styles = ("-", "--", ":", "-.", (0, (5, 1)), (0, (1, 1)))
    figure, axes = plt.subplots(1, len(groups), figsize=(11, 3.8), sharey=True)
    for ax, (title, names) in zip(axes, groups.items(), strict=True):
        for name, style in zip(names, styles, strict=False):
            ordered = np.sort(score[name])
            share = np.arange(1, ordered.size + 1) / ordered.size
            ax.step(ordered, share, linestyle=style, label=name, where="post")
        ax.plot(1.0, 0.95, marker="x", color="black", markersize=9, linestyle="none")
        ax.set_xlim(0.0, 2.5)
        ax.set_ylim(0.0, 1.0)
        ax.set_title(title)
        ax.set_xlabel("error / half width")
        ax.legend(fontsize=8, loc="lower right")
    axes[0].set_ylabel("share of values below")
    figure.text(
        0.5,
        0.01,
        "Cumulative shares; lines that pass through the cross hold the exact value in 95 % of "
        "cases, lines below it are too narrow.",
        ha="center",
        fontsize=8,
    )
    figure.tight_layout(rect=(0, 0.04, 1, 1))
    figure.savefig(path, dpi=120, metadata={"Software": None})
    plt.close(figure)
