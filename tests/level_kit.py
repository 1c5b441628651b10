"""Lattice levels made of exact transition matrices with an error of known law."""

from __future__ import annotations

import numpy as np

from scatterloom.scattering.case import Asked, combine_levels
from scatterloom.scattering.record import CaseRecord
from scatterloom.solve.block import BlockSolution
from scatterloom.solve.start import StoredFields
from scatterloom.transition.level import LevelResult
from scatterloom.transition.matrix import TransitionMatrix, efficiencies

ASKED = Asked(f11_relative=0.02, ratio_absolute=0.01, efficiency_relative=0.01)


def level(
    transition: TransitionMatrix,
    size_parameter: float,
    solver_error: float = 1e-6,
    absorption: float | None = None,
    converged: bool = True,
    dropped: bool = False,
    arithmetic: bool = False,
    residual: float = 1e-4,
    products: float = 4.0,
) -> LevelResult:
    """A level that found `transition`; energy is conserved unless `absorption` says otherwise."""
    extinction, scattering = efficiencies(transition, size_parameter)
    # not the same for every degree, or normalized matrices would not notice
    less = transition.matrix * (1 + solver_error * np.cos(transition.labels.degree))[:, None]
    solution = BlockSolution(
        amplitudes=[],
        remainder=[],
        fields=[],
        error=solver_error,
        residual=residual,
        products=products,
        packed_products=1,
        converged=converged,
        start_dropped=dropped,
    )
    return LevelResult(
        transition=transition,
        uncorrected=TransitionMatrix(less, transition.labels),
        asymmetry=1e-4,
        absorption_efficiency=extinction - scattering if absorption is None else absorption,
        solution=solution,
        fields=StoredFields(size_parameter, []),
        cells=1000,
        memory_bytes=10_000,
        arithmetic_cells=arithmetic,
    )


def disturbed(
    exact: TransitionMatrix, cells: int, square: float = 0.0, cube: float = 0.0
) -> TransitionMatrix:
    """Exact matrix with an error square (8/n)^2 + cube (8/n)^3, as n cells across leave.

    The error is diagonal and differs from wave to wave, smoothly with the degree.
    """
    size = square * (8 / cells) ** 2 + cube * (8 / cells) ** 3
    factor = 1 + size * np.exp(0.5j * exact.labels.degree)
    return TransitionMatrix(exact.matrix * factor[:, None], exact.labels)


def record_of(
    levels,
    cells,
    symmetry,
    index,
    size_parameter,
    asked: Asked = ASKED,
    spacing: float | None = None,
) -> CaseRecord:
    """Record of levels, with an identity made up."""
    return combine_levels(
        levels,
        cells,
        symmetry,
        index,
        size_parameter,
        2.0 / cells[-1] if spacing is None else spacing,
        asked,
        digest="0" * 20,
        shape='{"kind": "sphere"}',
        start="cold",
        products=4.0,
        cold_products_estimate=4.0,
        wall_seconds=0.5,
    )
