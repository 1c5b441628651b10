"""The record of one solved case: everything the table needs, at any scattering angle."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.error_bars import BEST, matrix_half_widths, matrix_model_share
from scatterloom.scattering.expansion import synthesize
from scatterloom.scattering.variants import Variants

MISSING, SOLVED, SOLVED_WITH_WARNING, FAILED = range(4)

STATUS_MEANINGS = ("missing", "solved", "solved_with_warning", "failed")
"""Names of the status numbers, in their order."""

FLAGS: dict[str, tuple[int, str]] = {
    "not_converged": (1, "the block solve stopped before its tolerance was met"),
    "accuracy_not_met": (2, "an error bar is wider than the accuracy asked for"),
    "truncation": (4, "the wave basis may be too short: raise n_max"),
    "energy_balance": (8, "extinction differs from scattering plus absorption beyond the bars"),
    "cells_too_coarse": (16, "fewer than ten cells per wavelength inside the particle"),
    "arithmetic_cells": (32, "negative real permittivity: arithmetic mean in boundary cells"),
    "start_dropped": (64, "the start from neighbouring sizes was poor and was dropped"),
    "no_memory": (128, "the case needs more memory than allowed"),
    "reused": (256, "solved by another campaign and taken from the case library"),
    "no_time": (512, "the case takes longer than allowed"),
    "breakdown": (1024, "the numbers of the solve broke down (not finite, or singular)"),
}
"""Warning flags: bit and meaning."""

INFORMATIVE = 64 | 256
"""Flags that do not make a case "solved with warning": the result is as good as any."""

SCALARS = (
    "extinction_efficiency",
    "scattering_efficiency",
    "absorption_efficiency",
    "asymmetry_parameter",
    "single_scattering_albedo",
)


def has_result(status: Any) -> NDArray[np.bool_]:
    """Whether cells of a table with these status numbers hold numbers."""
    return np.isin(status, (SOLVED, SOLVED_WITH_WARNING))


@dataclass
class CaseRecord:
    """Result of one case.

    Attributes
    ----------
    digest : str
        Identity of the case (physics, accuracy, numerics revision).
    shape : str
        Canonical JSON of the shape.
    index : complex
        Refractive index relative to the medium; of a coated particle that of the coating.
    size_parameter : float
    levels : tuple of int
        Cells across the longest axis on each lattice.
    lattice_cells : int
        Cells of the particle on the finest lattice.
    n_max, wave_count : int
    status : int
        1 solved, 2 solved with warning, 3 failed.
    warning_flags : int
        Bits of `FLAGS`.
    products : float
        Products with the lattice matrix per incident wave, mean over the levels.
    cold_products_estimate : float
        What zero starts would have used, from cold blocks of the same ladder.
    residual : float
        Largest relative residual of the wave blocks.
    operator_error : float
        Largest estimated relative error of the amplitudes of any level.
    wall_seconds, memory_bytes : float
    start : str
        "cold" or "infill".
    scalars : dict of str to (value, half width)
        The names in `SCALARS`.
    checks : dict of str to float
        Numbers for the audit: efficiencies by other paths.
    expansion : float64 (n_variant, l_max + 1, 4, 4)
        Coefficients of the best estimate, then of the variants that span its error.
    variants : tuple of str
        What each variant is.
    causes : tuple of str
        The source of error that each variant measures (`scatterloom.scattering.error_bars`).
    model_error : float
        Relative error of efficiencies from the cell model, part of their half widths.
    inner_indices : tuple of complex
        Indices of the materials further inside, such as that of a core.
    """

    digest: str
    shape: str
    index: complex
    size_parameter: float
    levels: tuple[int, ...]
    lattice_cells: int
    n_max: int
    wave_count: int
    status: int
    warning_flags: int
    products: float
    cold_products_estimate: float
    residual: float
    operator_error: float
    wall_seconds: float
    memory_bytes: float
    start: str
    scalars: dict[str, tuple[float, float]]
    checks: dict[str, float]
    expansion: NDArray[np.float64]
    variants: tuple[str, ...]
    causes: tuple[str, ...]
    model_error: float
    inner_indices: tuple[complex, ...] = ()
    transitions: Variants | None = field(default=None, compare=False, repr=False)
    """The transition matrices, of a case just solved; not part of what is written."""

    @property
    def indices(self) -> tuple[complex, ...]:
        """Indices of all materials, from outside inwards."""
        return (self.index, *self.inner_indices)

    def scattering_matrix(
        self, angles_deg: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Scattering matrix and its half widths (95 %) at the given angles.

        Parameters
        ----------
        angles_deg : float64 (n_angle,) [deg]

        Returns
        -------
        matrix, half_width : float64 (n_angle, 4, 4)
            Normalized so that the mean of F11 over all directions is one.
        ratio_half_width : float64 (n_angle, 4, 4)
            Of every element over F11; of F11 itself the relative half width.
        """
        matrix = synthesize(self.expansion[0], angles_deg)
        floor = self.model_error * matrix_model_share(self.size_parameter)
        element, ratio = matrix_half_widths(self.expansion, self.causes, floor, angles_deg)
        return matrix, element, ratio

    def to_arrays(self) -> dict[str, np.ndarray]:
        """Plain arrays that `from_arrays` turns back into the same record."""
        header = {
            name: getattr(self, name)
            for name in (
                "digest", "shape", "size_parameter", "lattice_cells", "n_max", "wave_count",
                "status", "warning_flags", "products", "cold_products_estimate", "residual",
                "operator_error", "wall_seconds", "memory_bytes", "start", "scalars", "checks",
                "variants", "causes", "model_error", "levels",
            )
        }  # fmt: skip
        arrays = {
            "header": np.array(json.dumps(header, sort_keys=True)),
            "index": np.array(self.index, dtype=np.complex128),
            "expansion": self.expansion,
        }
        if self.inner_indices:
            arrays["inner_indices"] = np.array(self.inner_indices, dtype=np.complex128)
        return arrays

    @classmethod
    def from_arrays(cls, arrays: dict[str, Any]) -> CaseRecord:
        """Inverse of `to_arrays`.

        Raises
        ------
        KeyError, ValueError, TypeError
            If the arrays are not those of a record.
        """
        header = json.loads(str(arrays["header"]))
        header["levels"] = tuple(header["levels"])
        header["variants"] = tuple(header["variants"])
        header["causes"] = tuple(header["causes"])
        header["scalars"] = {k: (v[0], v[1]) for k, v in header["scalars"].items()}
        return cls(
            index=complex(arrays["index"]),
            inner_indices=tuple(complex(m) for m in arrays.get("inner_indices", ())),
            expansion=np.asarray(arrays["expansion"]),
            **header,
        )


def failed_record(
    digest: str,
    shape: str,
    indices: complex | Sequence[complex],
    size_parameter: float,
    levels: tuple[int, ...],
    flags: int,
) -> CaseRecord:
    """Record of a case that gave no result."""
    nan = float("nan")
    index, *inner = indices if isinstance(indices, Sequence) else [indices]
    return CaseRecord(
        digest=digest, shape=shape, index=index, size_parameter=size_parameter, levels=levels,
        lattice_cells=0, n_max=0, wave_count=0, status=FAILED, warning_flags=flags,
        products=0.0, cold_products_estimate=0.0, residual=nan, operator_error=nan,
        wall_seconds=0.0, memory_bytes=0.0, start="cold",
        scalars={name: (nan, nan) for name in SCALARS}, checks={},
        expansion=np.full((1, 1, 4, 4), nan), variants=("none",), causes=(BEST,), model_error=nan,
        inner_indices=tuple(inner),
    )  # fmt: skip
