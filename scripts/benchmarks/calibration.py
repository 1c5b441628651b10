"""Whether the 95 % half widths tell the truth: random cases against exact solutions.

The constants of `scatterloom.scattering.error_bars` were set on the even-numbered cases; only the
odd-numbered ones are scored.
"""

from __future__ import annotations

import sys
import time

from benchmarks.calibration_picture import draw_regimes
from benchmarks.cases import ASKED, cold_record, turned_record
from benchmarks.drawn import (
    COATED,
    EDGED,
    MOST_SECONDS,
    REFERENCE_CELLS,
    SPHERE,
    SPHEROID,
    TURNED,
    Drawn,
    Limits,
    Reference,
    draw,
    reference,
)
from benchmarks.output import Result
from benchmarks.parallel import each
from benchmarks.scoring import ANGLES_DEG, Scored, by_quantity, by_regime, error_pairs
from scatterloom.scattering.record import SCALARS, CaseRecord

__all__ = ["ANGLES_DEG", "SCALARS", "drawn", "run", "solved"]

SEED = 4242
ANY_INDEX = 2.1
"""|m| of 2 + 0.5i is 2.06."""
WANTED = {
    SPHERE: (46, Limits(largest_x=8.0, largest_index=ANY_INDEX)),
    SPHEROID: (62, Limits(largest_x=8.0, largest_index=ANY_INDEX)),
    COATED: (46, Limits(largest_x=8.0, largest_index=ANY_INDEX)),
    TURNED: (14, Limits(largest_x=2.5, largest_index=ANY_INDEX)),
    EDGED: (12, Limits(largest_x=2.5, largest_index=ANY_INDEX)),
}


def drawn() -> tuple[list[Drawn], int]:
    """The cases, and how many were left out for their cost."""
    return draw(WANTED, SEED, ASKED.f11_relative)


def solved(case: Drawn, threads: int) -> tuple[CaseRecord, Reference] | None:
    """Record and reference of a case; None where the reference does not converge."""
    exact = reference(case, threads)
    if exact is None:
        return None
    rotation, x = case.rotation, case.size_parameter
    if rotation is None:
        return cold_record(case.spec, case.indices, x, threads), exact
    return turned_record(case.spec, case.indices, x, rotation, threads), exact


def _scored(case: Drawn) -> Scored | None:
    found = solved(case, 1)
    return None if found is None else Scored(case, error_pairs(case, *found))


def run(threads: int) -> Result:
    """Solve the cases, one a thread, and count."""
    begun = time.perf_counter()
    cases, costly = drawn()
    results = each(_scored, cases, threads)
    unknown = results.count(None)
    calibrated, scored = ([s for s in results[half::2] if s is not None] for half in (0, 1))
    print(f"{time.perf_counter() - begun:.0f} s", file=sys.stderr)
    quantities, regimes = by_quantity(scored), by_regime(scored)
    own = by_quantity(calibrated)[-1]
    worst = min(regimes, key=lambda row: row["inside_percent"])
    counts = {kind: sum(s.case.kind == kind for s in (*calibrated, *scored)) for kind in WANTED}
    return Result(
        quantities,
        [
            f"{sum(counts.values())} random cases: "
            + ", ".join(f"{count} {kind}" for kind, count in counts.items())
            + f"; {len(scored)} of them scored here, the other half set the constants of the error "
            f"bars (all its values: {own['inside_percent']:.1f} % inside, median of bar / error "
            f"{own['median of bar / error']:.1f}).",
            "x from 0.3 to 8 (turned lattices and edged particles to 2.5), real index 1.05 to 2, "
            "absorbing (imaginary part 1e-4 to 0.5) or not, spheroids 1:3 to 3:1, cores with 0.3 "
            "to 0.9 of the radius; default accuracy, solved cold and refined as in a campaign "
            "(turned lattices are not refined).",
            f"{costly} more cases were drawn and left out because the first lattices would have "
            f"taken more than {MOST_SECONDS:g} s (large and elongated or strongly refracting), "
            f"{unknown} because the exact spheroid does not converge.",
            "References: Mie series, series of coated spheres, extended boundary condition "
            f"method; for cubes and prisms d^2 through aligned lattices of {REFERENCE_CELLS[0]} "
            f"and {REFERENCE_CELLS[1]} cells, whose own error counts against the bars here.",
            "'inside' counts values whose half width holds the exact value, over cases and, for "
            "matrix elements, angles 0, 3, ..., 180 deg; 95 is the aim. Values of one case at "
            "neighbouring angles are not independent.",
            "Elements are in units of F11 at their angle, scalars relative. Bar / error counts "
            "errors above 1e-8; for errors of a normal distribution and perfect bars its median "
            "would be 2.9. A 95th percentile of error / bar of 1 is ideal; above 1 the bars are "
            "too narrow by that factor, below 1 too wide.",
            f"Lowest coverage of a regime: {worst['inside_percent']:.1f} % for {worst['regime']}.",
        ],
        lambda path: draw_regimes(path, regimes, quantities[-1]["inside_percent"]),
        more={"by regime": regimes},
    )
