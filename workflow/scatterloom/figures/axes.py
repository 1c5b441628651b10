"""Axes and their ticks, the same in every figure."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.ticker import (
    FixedLocator,
    FuncFormatter,
    MultipleLocator,
    NullFormatter,
    NullLocator,
)

from scatterloom.figures.selection import FloatArray

ANGLE_LABEL = "scattering angle (deg)"


def angle_axis(axes: Axes, angles_deg: FloatArray) -> None:
    """Set up an axis of scattering angle."""
    axes.set_xlim(angles_deg[0], angles_deg[-1])
    axes.xaxis.set_major_locator(MultipleLocator(60 if np.ptp(angles_deg) > 100 else 20))


def plain_log_ticks(axis: Axis, low: float, high: float) -> None:
    """Ticks with plain numbers on a logarithmic axis from `low` to `high`, both positive."""
    reach = high / low
    steps = [1.0, 2.0, 3.0, 4.0, 6.0] if reach < 8 else [1.0, 2.0, 5.0] if reach < 100 else [1.0]
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    ticks = [s * 10.0**d for d in decades for s in steps if low <= s * 10.0**d <= high]
    if len(ticks) < 2:
        ticks = [float(f"{low:.3g}"), float(f"{high:.3g}")]
    axis.set_major_locator(FixedLocator(ticks))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_locator(NullLocator())
    axis.set_minor_formatter(NullFormatter())


def ratio_axis(axes: Axes, narrowest: float = 0.1) -> None:
    """Set up an axis of ratios, never so narrow that rounding or bars alone fill the panel."""
    low, high = axes.get_ylim()
    if high - low < narrowest:
        middle = 0.5 * (low + high)
        axes.set_ylim(middle - 0.5 * narrowest, middle + 0.5 * narrowest)
    axes.ticklabel_format(axis="y", style="plain", useOffset=False)
