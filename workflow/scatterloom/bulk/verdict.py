"""Which particles explain a measurement, how surely, and what the data can't tell."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2

from scatterloom.bulk.inverse_problem import pose
from scatterloom.bulk.measurement import Measurement
from scatterloom.bulk.retrieval import Fit, bootstrap, fit

if TYPE_CHECKING:
    import xarray

FloatArray = NDArray[np.float64]

SAMPLES = 100
MOST_TOGETHER = 6
_TWO_SIGMA = 4.0  # difference of chi-square below which one model is no worse than another
_WIDE = 0.5


@dataclass(frozen=True)
class Verdict:
    """Outcome of fits with every particle alone and with all together.

    Attributes
    ----------
    alone : dict of str to Fit
        Best fit of each particle, the best first.
    together : Fit or None
        Of all particles; None if there is one only, or more than `MOST_TOGETHER`.
    best : Fit
        `together` if it explains the data better than any particle alone, by more than
        chance and its freedom allow; the best one alone otherwise.
    samples : tuple of Fit
        Bootstrap of the best.
    warnings : tuple of str
        What the data can't tell.
    """

    alone: dict[str, Fit]
    together: Fit | None
    best: Fit
    samples: tuple[Fit, ...]
    warnings: tuple[str, ...]

    def interval(self, quantity: str) -> tuple[FloatArray, FloatArray]:
        """Ends of the 95 % interval of an attribute of `Fit`, over the bootstrap."""
        values = [getattr(sample, quantity) for sample in self.samples]
        low, high = np.percentile(values, [2.5, 97.5], axis=0)
        return low, high


def judge(
    table: xarray.Dataset,
    measurement: Measurement,
    particles: Sequence[str],
    samples: int = SAMPLES,
) -> Verdict:
    """Fit every particle alone and all together, and say what is known.

    Parameters
    ----------
    table : xarray.Dataset
    measurement : Measurement
    particles : sequence of str
    samples : int
        Of the bootstrap.

    Raises
    ------
    BadInput
        As `pose` and `fit` do.
    """
    single = {name: fit(pose(table, measurement, [name])) for name in particles}
    alone = dict(sorted(single.items(), key=lambda item: item[1].chi_square))
    first = next(iter(alone.values()))
    together = None
    if 1 < len(particles) <= MOST_TOGETHER:
        together = fit(pose(table, measurement, list(particles)))
    best, warnings = first, []
    if together is not None:
        # A mixture always fits as well; it must gain more than two sigma to be preferred, and
        # only where no single particle is good enough.
        gain = first.chi_square - together.chi_square
        poor = chi2.sf(first.chi_square, first.count) < 0.05
        if gain > _TWO_SIGMA and poor:
            best = together
    drawn = tuple(bootstrap(best, samples))
    verdict = Verdict(alone, together, best, drawn, ())
    if best is first:
        rivals = [
            name
            for name, other in alone.items()
            if other is not first and other.chi_square < first.chi_square + _TWO_SIGMA
        ]
        # A fit that is good in itself is not ruled out by a better one either.
        rivals += [
            name
            for name, other in alone.items()
            if other is not first
            and name not in rivals
            and chi2.sf(other.chi_square, other.count) > 0.05
        ]
        if rivals:
            names = ", ".join(rivals)
            warnings.append(
                f"the data can't tell {next(iter(alone))} from {names}: all of them fit"
            )
    else:
        low, high = verdict.interval("shares")
        for name, a, b in zip(best.problem.particles, low, high, strict=True):
            if b - a > _WIDE:
                warnings.append(
                    f"the data can't tell the share of {name}: {a:.2f} to {b:.2f} of the area fit"
                )
    probability = float(chi2.sf(best.chi_square, best.count))
    if probability < 0.01:
        warnings.append(
            f"no population of these particles fits: chi-square {best.chi_square:.0f} for "
            f"{best.count} data (probability {probability:.1e}); errors too small, or other "
            "particles"
        )
    low, high = verdict.interval("effective_radius_um")
    radius = best.effective_radius_um
    if high - low > _WIDE * radius or _insensitive(best):
        warnings.append(
            "the data hardly depend on size: distributions of very different sizes fit, so the "
            f"effective radius of {radius:.3g} um says little"
        )
    edge = best.area[:, [0, -1]].max() > 0.5 * best.area.max()
    if edge:
        warnings.append("the distribution is large at the end of the table's sizes: widen them")
    return Verdict(alone, together, best, drawn, tuple(warnings))


def _insensitive(best: Fit) -> bool:
    """Whether particles of half, or of twice, the size fit as well."""
    problem, area = best.problem, best.area
    u = np.log(problem.radius_um)
    for shift in (-np.log(1.5), np.log(1.5)):
        moved = np.stack([np.interp(u - shift, u, row, left=0.0, right=0.0) for row in area])
        if moved.sum() > 0.5 * area.sum() and best.chi_square_of(moved) < max(
            best.chi_square + _TWO_SIGMA, best.count
        ):
            return True
    return False
