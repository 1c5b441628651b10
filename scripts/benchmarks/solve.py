"""Randomly oriented particles: our cold block and in-fill, and the textbook way."""

from __future__ import annotations

from dataclasses import replace

from benchmarks import products_needed, solve_irregular
from benchmarks.output import Result
from benchmarks.random_average import folded_directions
from benchmarks.reference import staircase
from benchmarks.ways import (
    ERROR_ASKED,
    LADDER,
    LADDER_RATIO,
    Problem,
    cold_and_filled,
    compared,
    extrapolated,
    ladder,
    ours,
    textbook,
)
from oracles.axial import random_orientation
from oracles.spheroid import spheroid
from scatterloom.campaign import effort
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec

RATIO, INDEX, SIZE_PARAMETER = 2.0, 1.5 + 0.01j, 3.0
REFERENCE_CELLS = (16, 24, 32)
ROUNDS = 5
LEBEDEV_DEGREE = 15  # 86 directions; enough at this size (rms of F11 below 0.01 %)
SHAPE = {"kind": "spheroid", "equatorial_to_polar": RATIO}


def run(threads: int) -> Result:
    """Solve the case three ways and compare each with the exact solution."""
    shape = from_spec(SHAPE)
    problem = Problem(shape, INDEX, lambda x: random_orientation(spheroid(RATIO, INDEX, x)))
    lattices = [lattice(shape, n) for n in problem.cells(SIZE_PARAMETER)]
    rows = cold_and_filled(problem, SIZE_PARAMETER, lattices, ROUNDS, threads)
    rows.append(ladder(problem, 3, threads))
    # Mirror planes and all, but the solver is not told of them.
    unknown = [replace(grid, mirrors=(False, False, False), symmetry="none") for grid in lattices]
    way = "cold, symmetry not used"
    rows.append(ours(way, problem, SIZE_PARAMETER, unknown, (), threads))
    rule = folded_directions(LEBEDEV_DEGREE)
    classic = [
        textbook(problem, SIZE_PARAMETER, staircase(shape.half_extents, n), n, rule, True, threads)
        for n in REFERENCE_CELLS
    ]
    irregular, irregular_notes = solve_irregular.measure(threads)
    needed = products_needed.measure(threads)
    return Result(
        compared([*rows, *classic, extrapolated(classic)]),
        [
            f"Oblate spheroid 2:1, x = {SIZE_PARAMETER:g}, m = 1.5+0.01i, random orientation, "
            "errors against the extended boundary condition method at 0, 5, ..., 180 deg.",
            *irregular_notes,
            "'waves' are incident waves solved for: a complete basis in ours, plane waves in the "
            "textbook way (for the spheroid a Lebedev rule of 86 directions, of which symmetry "
            "leaves 10, two polarizations each), all of them solved.",
            "'textbook, extrapolated' takes the textbook way to a worst ratio error of "
            f"{ERROR_ASKED:g}: its error times cells across is taken as constant (it falls no "
            "faster), its time as growing with the cube of the cells across (it grows faster). "
            "The last column compares with that row, although ours is more accurate.",
            f"The ladders have sizes from {LADDER[0]:g} to {LADDER[1]:g} at a ratio of "
            f"{LADDER_RATIO:g}; their rows hold means over the sizes, anchors included, and the "
            "largest error of some of them.",
            "'symmetry not used' solves the same lattices without their mirror planes.",
            "Ours solves three lattices and extrapolates; products per wave are means over them, "
            "packed products sums.",
            "In-fill starts from four anchors "
            f"{effort.anchor_step(INDEX, SIZE_PARAMETER):.3g} apart in size parameter; the case "
            "lies in the middle between two. The anchors' own time is not counted.",
            f"Times of ours are medians of {ROUNDS} rounds ({solve_irregular.ROUNDS} without "
            "symmetry), those of the textbook way are measured once.",
            "The last table counts waves multiplied over waves in the basis, on lattices of "
            f"{products_needed.CELLS} cells across; a packed product serves a wave of every parity "
            "class. Goals: 5 products a wave, and 1 packed product a wave for three mirror planes. "
            "True errors are against a solve in double precision to "
            f"{products_needed.EXACT_TOLERANCE:g}.",
            "'seconds' include kernels, far fields or orientation averages; the textbook "
            "residual is 1e-5.",
        ],
        more={
            "a particle without symmetry, x = 3, m = 1.5+0.01i": irregular,
            "products of cold blocks, x = 5, m = 1.5, operator error 1e-4": needed,
        },
    )
