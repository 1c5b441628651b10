"""Solve a random sample of a table's cells again and compare within the error bars."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from scatterloom.attempts import solve_case
from scatterloom.graph import Graph
from scatterloom.jobs import task_of
from scatterloom.scattering.record import FAILED, SCALARS, CaseRecord
from scatterloom.store.table import open_table

if TYPE_CHECKING:
    import xarray

ROUNDING = 1e-6
"""Difference that single-precision half widths in the table cannot tell, relative."""


@dataclass(frozen=True)
class Compared:
    """One cell solved again.

    Attributes
    ----------
    particle : str
    wavelength_um, size_parameter : float
    worst : float
        Largest difference over the sum of the two half widths, of all scalars and elements.
    worst_of : str
        The quantity that has it.
    agrees : bool
        Whether every difference is within that sum.
    """

    particle: str
    wavelength_um: float
    size_parameter: float
    worst: float
    worst_of: str
    agrees: bool


def resolve_sample(graph: Graph, count: int, seed: int, threads: int = 1) -> Iterator[Compared]:
    """Solve some cells of a campaign's table from nothing and compare them with it.

    Parameters
    ----------
    graph : Graph
    count : int
        Cells drawn, without replacement, among those with a result.
    seed : int
    threads : int

    Raises
    ------
    IntegrityError
        If the table is not as it was committed.
    """
    table = open_table(graph.layout.table)
    status = table["status"].values
    cells = np.argwhere((status > 0) & (status != FAILED))
    chosen = np.random.default_rng(seed).permutation(len(cells))[:count]
    job_of = {digest: name for name, job in graph.jobs.items() for digest, _ in job.cases}
    for cell in cells[np.sort(chosen)]:
        case = graph.grid.cases[int(graph.grid.where[tuple(cell)])]
        task = task_of(graph.jobs[job_of[case.digest]].spec(), threads)
        solved, _ = solve_case(task, case.digest, case.size_parameter, [], lambda x, residual: None)
        yield _compare(table, (int(cell[0]), int(cell[1]), int(cell[2])), solved)


def _compare(table: xarray.Dataset, cell: tuple[int, int, int], solved: CaseRecord) -> Compared:
    p, w, s = cell
    at = {"particle": p, "wavelength": w, "size": s}
    stored = table.isel(at).load()
    found = {} if solved.status == FAILED else _excesses(stored, solved)
    worst_of = max(found, key=lambda name: found[name]) if found else "no result"
    worst = found.get(worst_of, float("inf"))
    return Compared(
        particle=str(table["particle"].values[p]),
        wavelength_um=float(table["wavelength"].values[w]),
        size_parameter=solved.size_parameter,
        worst=worst,
        worst_of=worst_of,
        agrees=worst <= 1.0,
    )


def _excesses(stored: Any, solved: CaseRecord) -> Mapping[str, float]:
    """Difference over the sum of the two half widths, the table's and the new, of everything."""
    out = {}
    for name in SCALARS:
        value, own = solved.scalars[name]
        kept, width = float(stored[name]), float(stored[f"{name}_error"])
        out[name] = abs(value - kept) / (width + own + ROUNDING * abs(kept))
    matrix, own_width, _ = solved.scattering_matrix(stored["angle"].values)
    kept = stored["scattering_matrix"].values
    width = stored["scattering_matrix_error"].values + own_width
    # Elements that vanish by symmetry have no width: they are compared on the scale of F11.
    floor = ROUNDING * np.abs(kept[:, :1, :1])
    excess = np.abs(matrix - kept) / (width + floor)
    out["scattering_matrix"] = float(excess.max())
    return out


def same_tables(one: Path, other: Path) -> tuple[int, float]:
    """Compare two tables of one campaign cell by cell.

    Returns
    -------
    beyond : int
        Cells in which a scalar differs by more than the sum of its two half widths.
    worst : float
        Largest difference over that sum.
    """
    a, b = open_table(one).load(), open_table(other).load()
    both = (a["status"].values > 0) & (a["status"].values != FAILED)
    both &= (b["status"].values > 0) & (b["status"].values != FAILED)
    beyond = a["status"].values.astype(bool) & ~both & (a["status"].values != FAILED)
    worst = 0.0
    for name in SCALARS:
        width = a[f"{name}_error"].values + b[f"{name}_error"].values
        width = width + ROUNDING * np.abs(a[name].values)
        excess = np.where(both, np.abs(a[name].values - b[name].values) / width, 0.0)
        worst = max(worst, float(excess.max(initial=0.0)))
        beyond |= excess > 1.0
    return int(beyond.sum()), worst
