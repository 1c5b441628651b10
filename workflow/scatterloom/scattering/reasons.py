"""Why a case gave no result, or one with a warning: numbered reasons, with what to change."""

from __future__ import annotations

from dataclasses import dataclass

from scatterloom.scattering.record import FLAGS


@dataclass(frozen=True)
class Reason:
    """One reason: its number, the warning flag that carries it, its meaning, and advice."""

    number: int
    flag: str
    meaning: str
    advice: str

    def __str__(self) -> str:
        return f"reason {self.number} ({self.flag}): {self.meaning}"


_ADVICE = {
    "not_converged": "refine the lattice with 'solver.levels', or leave out sizes with "
    "refractive indices this far from one",
    "no_memory": "raise 'solver.memory_gib', run on a machine with more memory, or ask for "
    "less accuracy or smaller sizes",
    "no_time": "raise 'solver.case_minutes', or ask for less accuracy or smaller sizes",
    "breakdown": "check the refractive index of the material; report the case if it is sound",
}

REASONS = tuple(
    Reason(number, flag, FLAGS[flag][1], advice)
    for number, (flag, advice) in enumerate(_ADVICE.items(), start=1)
)
"""All reasons, in the order of their numbers (numbers are never given anew)."""

WARNING_ADVICE = {
    "not_converged": "as for reason 1; until then trust no more digits than the error bars give",
    "accuracy_not_met": "ask for less under 'accuracy', allow finer lattices with "
    "'solver.memory_gib' and 'solver.case_minutes', or use the numbers with their error bars",
    "truncation": "ask for more accuracy under 'accuracy', which lengthens the wave basis",
    "energy_balance": "ask for more accuracy under 'accuracy'; do not use the absorption of "
    "these cells",
    "cells_too_coarse": "give finer lattices with 'solver.levels'",
    "thin_part": "give finer lattices with 'solver.levels', or make the layer thicker",
    "arithmetic_cells": "give finer lattices with 'solver.levels' and compare; cells cut by the "
    "surface converge slowly for metals",
    "no_memory": "raise 'solver.memory_gib', or run on a machine with more memory",
    "no_time": "raise 'solver.case_minutes'",
    "breakdown": "check the refractive index of the material",
}
"""What to change where a case has a result with a warning, by flag; `INFORMATIVE` flags, which
are no warnings, are missing."""


def reason_of(warning_flags: int) -> Reason:
    """Return the reason of a failed case; that a solve did not converge is the last resort.

    A case that ran out of time or memory has not converged either, so those come first.
    """
    for reason in (*REASONS[1:], REASONS[0]):
        if warning_flags & FLAGS[reason.flag][0]:
            return reason
    return REASONS[0]
