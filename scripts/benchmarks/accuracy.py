"""Errors of a result against an exact solution of the tests."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

ANGLES_DEG = np.arange(0.0, 181.0, 5.0)


class Exact(Protocol):
    """What the exact solutions offer."""

    @property
    def extinction_efficiency(self) -> float: ...

    def scattering_matrix(self, angles_deg: Any) -> NDArray[np.float64]: ...


def errors(extinction: float, matrix: NDArray[np.float64], exact: Exact) -> dict[str, float]:
    """Relative error of Qext, rms relative error of F11, largest error of any Fij/F11."""
    wanted = exact.scattering_matrix(ANGLES_DEG)
    f11, f11_exact = matrix[:, 0, 0], wanted[:, 0, 0]
    off = matrix / f11[:, None, None] - wanted / f11_exact[:, None, None]
    return {
        "Qext_error_percent": 100 * (extinction / exact.extinction_efficiency - 1.0),
        "F11_rms_percent": 100 * float(np.sqrt(np.mean((f11 / f11_exact - 1.0) ** 2))),
        "worst_ratio_error": float(np.abs(off).max()),
    }
