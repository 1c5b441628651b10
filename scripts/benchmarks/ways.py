"""Ways to the scattering matrix of a randomly oriented particle: ours, and the textbook's."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from benchmarks.accuracy import ANGLES_DEG, Exact, errors
from benchmarks.cases import ASKED, record_of, solve_case
from benchmarks.random_average import extinction_efficiency, mueller_of_incidence, transverse
from benchmarks.reference import PointDipoles
from oracles.mueller import gauss_angles
from scatterloom.campaign import effort
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import Shape
from scatterloom.scattering.record import CaseRecord
from scatterloom.solve.start import nearest
from scatterloom.transition.level import LevelResult

LADDER, LADDER_RATIO = (2.5, 3.5), 1.02
ERROR_ASKED = 0.01
"""Worst error of any Fij/F11 at which times are compared."""

AZIMUTHS = 24
NORMALIZING_NODES = 24
"""Gauss-Legendre nodes for the integral of F11; its degree is below 30 at these sizes."""


@dataclass(frozen=True)
class Problem:
    """A particle, its index, and what is taken for the exact solution at each size."""

    shape: Shape
    index: complex
    exact: Callable[[float], Exact]

    def cells(self, x: float) -> tuple[int, ...]:
        """Lattices a campaign begins with."""
        return effort.levels(tuple(self.shape.half_extents), self.index, x, ASKED.f11_relative)


def textbook(
    problem: Problem,
    x: float,
    staircase: tuple[NDArray, float],
    cells: int,
    rule: tuple[NDArray[np.float64], NDArray[np.float64]],
    mirrored: bool,
    threads: int,
) -> dict[str, Any]:
    """One plane wave at a time on a staircase of point dipoles.

    `rule` has the directions of incidence and their weights. If a direction stands for its
    mirror images (`mirrored`), the eight elements odd under a mirror vanish.
    """
    cell, spacing = staircase
    begun = time.perf_counter()
    particle = PointDipoles(cell, x * spacing, threads)
    node_deg, node_weight = gauss_angles(NORMALIZING_NODES)
    angles = np.concatenate([ANGLES_DEG, node_deg])
    matrix = np.zeros((len(angles), 4, 4))
    extinction, solving = 0.0, 0.0
    for direction, weight in zip(*rule, strict=True):
        pair = []
        for polarization in transverse(direction):
            started = time.perf_counter()
            dipoles = particle.solve(problem.index, direction, polarization)
            solving += time.perf_counter() - started
            pair.append(dipoles)
            extinction += (
                0.5 * weight * extinction_efficiency(dipoles, particle, direction, polarization, x)
            )
        matrix += weight * mueller_of_incidence(
            particle, (pair[0], pair[1]), direction, angles, AZIMUTHS
        )
    if mirrored:
        matrix[:, :2, 2:] = matrix[:, 2:, :2] = 0.0
    shown = len(ANGLES_DEG)
    matrix = matrix[:shown] / (0.5 * node_weight @ matrix[shown:, 0, 0])
    waves = 2 * len(rule[0])
    return {
        "way": "textbook",
        "cells_across": str(cells),
        "waves": waves,
        "products_per_wave": particle.products / waves,
        "packed_products": particle.products,
        "seconds": time.perf_counter() - begun,
        "seconds_solving": solving,
        **errors(extinction, matrix, problem.exact(x)),
    }


def extrapolated(rows: Sequence[dict[str, Any]]) -> dict[str, Any]:
    """What the textbook way would take for the error asked: at least its last row times n^3."""
    last = rows[-1]
    # The error falls with the spacing, erratically: one over the number of cells, no better.
    needed = float(last["cells_across"]) * last["worst_ratio_error"] / ERROR_ASKED
    return {
        **dict.fromkeys(last),
        "way": "textbook, extrapolated",
        "cells_across": f"{needed:.0f}",
        "waves": last["waves"],
        "seconds": last["seconds"] * (needed / float(last["cells_across"])) ** 3,
        "worst_ratio_error": ERROR_ASKED,
    }


def ours(
    way: str,
    problem: Problem,
    x: float,
    lattices: Sequence[Lattice],
    anchors: Sequence[Sequence[LevelResult]],
    threads: int,
) -> dict[str, Any]:
    """All lattices of one case, cold or from the fields of solved neighbours."""
    cells = [grid.cells_across for grid in lattices]
    begun = time.perf_counter()
    levels = solve_case(problem.shape, lattices, problem.index, x, anchors, threads)
    solved = time.perf_counter() - begun
    record = record_of(problem.shape, cells, lattices, problem.index, x, levels)
    matrix, _, _ = record.scattering_matrix(ANGLES_DEG)
    return {
        "way": way,
        "cells_across": "+".join(str(n) for n in cells),
        "waves": record.wave_count,
        "products_per_wave": record.products,
        "packed_products": sum(level.solution.packed_products for level in levels),
        "seconds": time.perf_counter() - begun,
        "seconds_solving": solved,
        **errors(record.scalars["extinction_efficiency"][0], matrix, problem.exact(x)),
    }


def cold_and_filled(
    problem: Problem, x: float, lattices: Sequence[Lattice], rounds: int, threads: int
) -> list[dict[str, Any]]:
    """Cold and in-filled in turns, so that other load hits both alike; medians over rounds."""
    step = effort.anchor_step(problem.index, x)
    warm_up = solve_case(problem.shape, lattices[:1], problem.index, x, (), threads)
    solve_case(problem.shape, lattices[:1], problem.index, x, [warm_up], threads)
    anchors = [
        solve_case(problem.shape, lattices, problem.index, x + offset * step, (), threads)
        for offset in (-1.5, -0.5, 0.5, 1.5)
    ]
    ways: dict[str, list[dict[str, Any]]] = {"cold block": [], "in-fill": []}
    for _ in range(rounds):
        for way, measured in ways.items():
            neighbours = anchors if way == "in-fill" else ()
            measured.append(ours(way, problem, x, lattices, neighbours, threads))
    return [
        sorted(measured, key=lambda row: float(row["seconds_solving"]))[rounds // 2]
        for measured in ways.values()
    ]


def _segments(problem: Problem) -> list[tuple[tuple[int, ...], list[float]]]:
    """Sizes of the ladder that share their lattices, as a campaign groups them."""
    count = int(np.log(LADDER[1] / LADDER[0]) / np.log(LADDER_RATIO) + 1e-9) + 1
    segments: dict[tuple[int, ...], list[float]] = {}
    for x in LADDER[0] * LADDER_RATIO ** np.arange(count):
        segments.setdefault(problem.cells(float(x)), []).append(float(x))
    return list(segments.items())


def anchors_of(index: complex, sizes: Sequence[float]) -> set[float]:
    """The sizes of a segment that are solved cold."""
    step = effort.anchor_step(index, sizes[-1])
    spans = max(1, int(np.ceil((sizes[-1] - sizes[0]) / step)))
    nodes = np.linspace(sizes[0], sizes[-1], spans + 1)
    return {min(sizes, key=lambda x, node=node: abs(x - node)) for node in nodes}


def ladder(problem: Problem, checked: int, threads: int) -> dict[str, Any]:
    """A ladder of sizes, anchors and all, per size; errors are the largest of `checked` sizes."""
    segments = [
        (cells, sizes, [lattice(problem.shape, n) for n in cells])
        for cells, sizes in _segments(problem)
    ]
    records: dict[float, CaseRecord] = {}
    packed = 0
    begun = time.perf_counter()
    for cells, sizes, lattices in segments:
        chosen = anchors_of(problem.index, sizes)
        anchors: list[Sized] = []
        for x in [*sorted(chosen), *(x for x in sizes if x not in chosen)]:
            around = [] if x in chosen else [a.levels for a in nearest(anchors, x)]
            levels = solve_case(problem.shape, lattices, problem.index, x, around, threads)
            packed += sum(level.solution.packed_products for level in levels)
            if x in chosen:
                anchors.append(Sized(levels))
            records[x] = record_of(problem.shape, cells, lattices, problem.index, x, levels)
    seconds = time.perf_counter() - begun
    count = len(records)
    off = []
    for x in sorted(records)[1 :: max(1, count // checked)]:
        matrix, _, _ = records[x].scattering_matrix(ANGLES_DEG)
        extinction = records[x].scalars["extinction_efficiency"][0]
        off.append(errors(extinction, matrix, problem.exact(x)))
    return {
        "way": f"ladder of {count}, per size",
        "cells_across": " / ".join("+".join(str(n) for n in cells) for cells, *_ in segments),
        "waves": max(record.wave_count for record in records.values()),
        "products_per_wave": float(np.mean([record.products for record in records.values()])),
        "packed_products": packed / count,
        "seconds": seconds / count,
        "seconds_solving": None,
        **max(off, key=lambda row: row["worst_ratio_error"]),
    }


@dataclass(frozen=True)
class Sized:
    """Solved lattices of one size."""

    levels: list[LevelResult]

    @property
    def size_parameter(self) -> float:
        return self.levels[0].fields.size_parameter


def compared(rows: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """The rows, each with its gain over the last one."""
    for row in rows:
        row["times faster than textbook"] = rows[-1]["seconds"] / row["seconds"]
    return rows
