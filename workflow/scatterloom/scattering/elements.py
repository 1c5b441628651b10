"""Names of matrix elements and of the ratios that polarimetry reports, with their half widths.

Signs of F12 and F34 follow Bohren & Huffman 1983 (section 3.3): a small sphere
has F12 <= 0, so that -F12/F11 is its positive degree of linear polarization.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Ratio:
    """One matrix element divided by F11.

    Attributes
    ----------
    name : str
        Identifier, e.g. ``minus_f12_f11``.
    row, col : int
        Position of the numerator, counted from 0.
    sign : float
        +1, or -1 where the usual quantity is minus the ratio.
    label : str
        How the quantity is written in text.
    signed : bool
        Whether both signs occur, so that a colour map must be centred on zero.
    """

    name: str
    row: int
    col: int
    sign: float
    label: str
    signed: bool


RATIOS = (
    Ratio("f22_f11", 1, 1, 1.0, "F22/F11", False),
    Ratio("f33_f11", 2, 2, 1.0, "F33/F11", True),
    Ratio("f44_f11", 3, 3, 1.0, "F44/F11", True),
    Ratio("minus_f12_f11", 0, 1, -1.0, "−F12/F11", True),
    Ratio("f34_f11", 2, 3, 1.0, "F34/F11", True),
)
"""The five ratios of a mirror-symmetric ensemble."""


def ratio(matrix: Any, ratio_half_width: Any, which: Ratio) -> tuple[FloatArray, FloatArray]:
    """Value and half width of one ratio.

    Parameters
    ----------
    matrix : float64 (..., 4, 4)
        Scattering matrices.
    ratio_half_width : float64 (..., 4, 4)
        Half widths (95 %) of their elements over F11, as a record or a table holds them.
    which : Ratio
        The ratio wanted.

    Returns
    -------
    value, half_width : float64 (...)
    """
    value = which.sign * matrix[..., which.row, which.col] / matrix[..., 0, 0]
    return value, ratio_half_width[..., which.row, which.col]


def linear_depolarization(f22_f11: Any, half_width: Any) -> tuple[Any, Any]:
    """Linear depolarization ratio (F11 - F22)/(F11 + F22) at 180 degrees.

    Parameters
    ----------
    f22_f11, half_width : float64 (...)
        r = F22/F11 at 180 degrees and its half width.

    Returns
    -------
    value, half_width : float64 (...)
        The derivative is -2/(1 + r)^2.
    """
    return (1.0 - f22_f11) / (1.0 + f22_f11), 2.0 * half_width / (1.0 + f22_f11) ** 2


def circular_depolarization(f44_f11: Any, half_width: Any) -> tuple[Any, Any]:
    """Circular depolarization ratio (F11 + F44)/(F11 - F44) at 180 degrees.

    Parameters
    ----------
    f44_f11, half_width : float64 (...)
        r = F44/F11 at 180 degrees and its half width.

    Returns
    -------
    value, half_width : float64 (...)
        The derivative is 2/(1 - r)^2.
    """
    return (1.0 + f44_f11) / (1.0 - f44_f11), 2.0 * half_width / (1.0 - f44_f11) ** 2
